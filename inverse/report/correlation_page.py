"""The page of a correlation: one self-contained HTML file, its picture inside it."""

import base64
from typing import TYPE_CHECKING

from finback.correlate import Correlation
from finback.report import correlation, html

if TYPE_CHECKING:
    from finback.report.figures import Picture

ALT = (
    "Runs of {title} on logarithmic axes with the law {equation}, its 95 % band, the band of new runs and "
    "the published laws, and the ratio of each run to the law beneath."
)


def render(found: Correlation, drawn: "Picture") -> str:
    """Return the page of a correlation with its picture; the same input gives the same bytes."""
    seen = correlation.build(found)
    data = base64.b64encode(drawn.svg if len(drawn.svg) < 4 * len(drawn.png) else drawn.png).decode("ascii")
    kind = "svg+xml" if len(drawn.svg) < 4 * len(drawn.png) else "png"  # thousands of runs make a long SVG
    picture = html.Embedded(
        f"data:image/{kind};base64,{data}", ALT.format(title=seen.title, equation=seen.equation)
    )
    template = html.environment().get_template("correlation.html.j2")
    return str(template.render(view=seen, picture=picture))
