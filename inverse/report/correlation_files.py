"""Files of a correlation: correlation.json, correlation.html, correlation_runs.csv and the picture."""

from functools import partial
from pathlib import Path

import numpy as np

from finback.correlate import ABSCISSAE, ORDINATES, Correlation
from finback.report.files import FIGURES, Filler, of_json, of_pictures, of_text, put, unwritable
from finback.report.files import prepare as prepare_files

RESULT, PAGE, RUNS = "correlation.json", "correlation.html", "correlation_runs.csv"
PICTURES = tuple(f"{FIGURES}/correlation{suffix}" for suffix in (".png", ".svg"))
OURS = (RESULT, PAGE, RUNS, *PICTURES)
"""Every file of a correlation, relative to its folder."""


def prepare(folder: Path, force: bool = False) -> None:
    """Make sure that a correlation can be written to a folder. Raises InputError as `files.prepare` does."""
    prepare_files(folder, force, OURS)


def write(found: Correlation, folder: Path, force: bool = False) -> Path:
    """Write a correlation and return where its page lies.

    Arguments: found; folder, created when it is missing; force, whether an earlier one is replaced. Raises
    InputError as `prepare` does.
    """
    from finback.report import correlation_figure, correlation_page

    prepare(folder, force)
    drawn = correlation_figure.draw(found)
    page = correlation_page.render(found, drawn)
    fillers: dict[str, Filler] = {
        **of_pictures([drawn]),
        RUNS: partial(_write_runs, found=found),
        PAGE: of_text(page),
        RESULT: of_json(found.to_dict()),
    }
    try:
        put(folder, fillers)
    except OSError as error:
        raise unwritable(folder, error) from error
    return folder / PAGE


def _write_runs(place: Path, found: Correlation) -> None:
    """Write a row a run: its place on the axes, how it lies to the law, and the speed that its h implies."""
    import pandas as pd

    (across, x_unit), (up, y_unit) = ABSCISSAE[found.form], ORDINATES[found.form]
    columns = {
        "run": np.array(found.runs, dtype=object),
        _header(across, x_unit): found.x,
        _header(f"{across}_sd", x_unit): found.x_sd,
        _header(up, y_unit): found.y,
        _header(f"{up}_sd", y_unit): found.y_sd,
        "ratio": found.ratio,
        "deviations": found.deviation,
        "outlier_probability": found.outlying,
    }
    if found.implied is not None and found.speed is not None:
        columns["speed [m/s]"] = found.speed
        columns["implied_speed [m/s]"] = found.implied.speed
        columns["implied_speed_sd [m/s]"] = found.implied.sd
    pd.DataFrame(columns).to_csv(place, index=False, float_format="%.6g", lineterminator="\n")


def _header(name: str, unit: str) -> str:
    return name if unit == "1" else f"{name} [{unit}]"
