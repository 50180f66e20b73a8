"""Files of a diagnosis: diagnosis.json, report.html and the pictures, in one folder."""

from pathlib import Path

from finback.diagnosis import Diagnosis
from finback.report import files

RESULT, PAGE = "diagnosis.json", "report.html"
FIGURE_STEMS = ("waterfall", "readings")
OURS = (
    RESULT,
    PAGE,
    *(f"{files.FIGURES}/{stem}{suffix}" for stem in FIGURE_STEMS for suffix in (".png", ".svg")),
)
"""Every file of a diagnosis, relative to its folder."""


def prepare(folder: Path, force: bool = False) -> None:
    """Make sure that a diagnosis can be written to a folder. Raises InputError as `files.prepare` does."""
    files.prepare(folder, force, OURS)


def write(found: Diagnosis, folder: Path, force: bool = False) -> Path:
    """Write a diagnosis and return where its page lies; diagnosis.json is moved to its place last.

    Arguments: found; folder, created when it is missing; force, whether an earlier one is replaced. Raises
    InputError as `prepare` does.
    """
    from finback.report import diagnosis_figure, diagnosis_page

    prepare(folder, force)
    pictures = diagnosis_figure.draw(found)
    page = diagnosis_page.render(found, pictures)
    fillers = {
        **files.of_pictures(pictures),
        PAGE: files.of_text(page),
        RESULT: files.of_json(found.to_dict()),
    }
    try:
        files.put(folder, fillers)
    except OSError as error:
        raise files.unwritable(folder, error) from error
    return folder / PAGE
