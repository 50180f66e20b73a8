"""The page: one self-contained HTML file, its figures inside it, no script and nothing from outside."""

import base64
import re
from collections.abc import Sequence
from dataclasses import dataclass
from functools import cache
from typing import TYPE_CHECKING, Any

from finback.estimate import Estimate
from finback.report import view

if TYPE_CHECKING:
    from finback.report.figures import Picture

NBSP = "\N{NO-BREAK SPACE}"

ALT = {
    "drawing": "Drawing of the fin of {title}, side view and section, with its sensors at their places.",
    "profile": "Temperature along the fin of {title}, run {run}: posterior median with its 95 % band, the "
    "readings with error bars of two standard deviations, and the residuals beneath.",
    "candidates": "Posterior probability of each candidate as a bar: {verdict}",
    "budget": "Share of the variance of each result by source, as one bar a result: the table above it in a "
    "picture. {shared}",
    "pairs": "Posterior of the main quantities of {title}: marginal densities with the prior dashed, and a "
    "density for each pair with contours holding 50 % and 95 % of the draws.",
}


@dataclass(frozen=True, slots=True)
class Embedded:
    """A figure inside the page: a data: URI and the text for who cannot see it."""

    uri: str
    alt: str


def render(estimate: Estimate, pictures: "Sequence[Picture]") -> str:
    """Return the page of an estimate.

    Arguments: estimate; pictures, its figures as `figures.draw` returns them. The same input gives the same
    bytes.
    """
    seen = view.build(estimate)
    embedded = {picture.name: _embed(picture, seen) for picture in pictures}
    return str(_template().render(view=seen, figures=embedded))


def _embed(picture: "Picture", seen: view.View) -> Embedded:
    alt = ALT[picture.name].format(
        title=seen.title, run=seen.run, verdict=seen.verdict, shared=seen.improvement
    )
    return embed(picture, alt)


def embed(picture: "Picture", alt: str) -> Embedded:
    """Return a figure for a page, as SVG, with the text for who cannot see it."""
    data = base64.b64encode(picture.svg).decode("ascii")
    return Embedded(f"data:image/svg+xml;base64,{data}", alt)


def _template() -> Any:
    return environment().get_template("report.html.j2")


@cache
def environment() -> Any:
    """Return what renders the templates: everything escaped, nothing undefined."""
    from jinja2 import Environment, PackageLoader, StrictUndefined

    made = Environment(
        loader=PackageLoader("finback.report"), autoescape=True, undefined=StrictUndefined, trim_blocks=True,
        lstrip_blocks=True, keep_trailing_newline=True,
    )  # fmt: skip
    made.filters |= {"whole": whole, "subscripts": subscripts}
    return made


def whole(text: str) -> str:
    """Return a value that breaks across lines only before its "±"."""
    return text.replace(" ", NBSP).replace(f"{NBSP}±", " ±")


def subscripts(text: str) -> Any:
    """Return HTML of our own symbols and equations: "T_air" with "air" set as a subscript."""
    from markupsafe import Markup

    parts = re.split(r"_(\w+)", text)
    marked = (Markup("<sub>{}</sub>").format(part) if n % 2 else part for n, part in enumerate(parts))
    return Markup("").join(marked)  # which escapes what is not marked up
