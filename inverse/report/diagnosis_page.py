"""The page of a diagnosis: one self-contained HTML file, its pictures inside it, no script."""

import re
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

from finback.diagnosis import Diagnosis
from finback.report import diagnosis_view, html

if TYPE_CHECKING:
    from finback.report.figures import Picture

ALT = {
    "waterfall": "Heat into the fin of {title} and temperature of its base, from now over what each cause "
    "put right brings to a healthy fin: the table of costs above it in a picture. {cost}",
    "readings": "Temperatures of {title}, run {run}, against the distance from the base; those that are "
    "likely wrong are crossed out, with an arrow to what they should read.",
}
LINE = re.compile(r'[A-Za-z_]\w* = (?:"[^"]*"|\{[^}]*\})')
"""A line of rig.toml inside a sentence."""


def render(found: Diagnosis, pictures: "Sequence[Picture]") -> str:
    """Return the page of a diagnosis; the same input gives the same bytes.

    Arguments: found; pictures, as `diagnosis_figure.draw` returns them.
    """
    seen = diagnosis_view.build(found)
    told = {"title": seen.title, "run": seen.run, "cost": seen.cost}
    embedded = {picture.name: html.embed(picture, ALT[picture.name].format(**told)) for picture in pictures}
    environment = html.environment()
    template = environment.get_template("diagnosis.html.j2")
    return str(template.render(view=seen, figures=embedded, coded=coded))


def coded(sentence: str) -> Any:
    """Return HTML of a sentence with the lines of rig.toml in it set as code."""
    from markupsafe import Markup, escape

    parts, at = [], 0
    for found in LINE.finditer(sentence):
        parts += [escape(sentence[at : found.start()]), Markup("<code>{}</code>").format(found.group())]
        at = found.end()
    return Markup("").join([*parts, escape(sentence[at:])])
