"""Files of a result: estimate.json, report.html, posterior.nc and the figures, in one folder.

Each file is written under a temporary name beside its place; when all are whole they are moved there,
estimate.json last, so that it stands for a complete result.
"""

import json
import os
import tempfile
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING, Any

from finback.errors import InputError
from finback.estimate import Estimate

if TYPE_CHECKING:
    from finback.report.figures import Picture

Filler = Callable[[Path], object]
"""What writes one file of a result."""

ESTIMATE, REPORT, POSTERIOR, FIGURES = "estimate.json", "report.html", "posterior.nc", "figures"
FIGURE_STEMS = ("drawing", "profile", "candidates", "pairs", "budget")
OURS = (
    ESTIMATE,
    REPORT,
    POSTERIOR,
    *(f"{FIGURES}/{stem}{suffix}" for stem in FIGURE_STEMS for suffix in (".png", ".svg")),
)
"""Every file a result may have, relative to its folder."""


@dataclass(frozen=True, slots=True)
class Written:
    """Where a result lies."""

    estimate: Path
    report: Path
    posterior: Path
    figures: tuple[Path, ...]


def prepare(folder: Path, force: bool = False, ours: Sequence[str] = OURS) -> None:
    """Make sure that a result can be written to a folder, before anything is computed; create the folder.

    Arguments: folder; force, whether an earlier result there may be replaced; ours, the files that it has.
    Raises InputError when it holds one and force is False, is no folder, or cannot be written.
    """
    earlier = [name for name in ours if os.path.lexists(folder / name)]
    if earlier and not force:
        raise InputError(
            folder, None, f"already holds an earlier result ({earlier[0]})",
            "choose another folder, or overwrite with --force",
        )  # fmt: skip
    for name in earlier:
        if (folder / name).is_dir():
            raise InputError(
                folder / name, None, "is a folder", "a result needs that name: choose another folder"
            )
    try:
        for place in (folder, folder / FIGURES):
            place.mkdir(parents=True, exist_ok=True)
            with tempfile.TemporaryFile(dir=place):
                pass
    except (OSError, ValueError) as error:
        raise unwritable(folder, error) from error


def write(estimate: Estimate, folder: Path, force: bool = False) -> Written:
    """Write a result: estimate.json, report.html, posterior.nc, and figures as PNG and SVG.

    Arguments: estimate; folder, created when it is missing; force, whether an earlier result is replaced.
    Only files of ours are: others in the folder stay as they are.
    Returns where they lie. Raises InputError as `prepare` does.
    """
    from finback.report import figures, html

    prepare(folder, force)
    pictures = figures.draw(estimate)
    page = html.render(estimate, pictures)
    drawn, draws = of_pictures(pictures), estimate.to_tree()
    fillers: dict[str, Filler] = {
        **drawn,
        POSTERIOR: lambda place: draws.to_netcdf(str(place), engine="h5netcdf"),
        REPORT: of_text(page),
        ESTIMATE: of_json(estimate.to_dict()),
    }
    try:
        put(folder, fillers)
        for name in OURS:
            if name not in fillers:  # of an earlier result, and wrong beside this one
                (folder / name).unlink(missing_ok=True)
    except OSError as error:
        raise unwritable(folder, error) from error
    return Written(
        folder / ESTIMATE, folder / REPORT, folder / POSTERIOR, tuple(folder / name for name in drawn)
    )


def of_pictures(pictures: "Sequence[Picture]") -> dict[str, Filler]:
    """Return what writes figures as PNG and SVG, by file name."""
    return {
        f"{FIGURES}/{picture.name}{suffix}": partial(Path.write_bytes, data=data)
        for picture in pictures
        for suffix, data in ((".png", picture.png), (".svg", picture.svg))
    }


def of_text(text: str) -> Filler:
    """Return what writes a text."""
    return partial(Path.write_text, data=text, encoding="utf-8", newline="\n")


def of_json(contents: Mapping[str, Any]) -> Filler:
    """Return what writes contents as JSON, which has no NaN."""
    return of_text(json.dumps(contents, allow_nan=False, ensure_ascii=False, indent=2) + "\n")


def put(folder: Path, fillers: Mapping[str, Filler]) -> None:
    """Fill a temporary file beside each place, then move all there; a failure leaves nothing behind."""
    filled: dict[Path, Path] = {}
    try:
        for name, fill in fillers.items():
            place = folder / name
            handle, path = tempfile.mkstemp(prefix=f".{place.name}.", suffix=place.suffix, dir=place.parent)
            os.close(handle)
            filled[place] = Path(path)
            fill(filled[place])
            filled[place].chmod(0o666 & ~_umask())  # as any new file, and not as a temporary one
        for place, temporary in filled.items():
            os.replace(temporary, place)
    finally:
        for temporary in filled.values():
            temporary.unlink(missing_ok=True)


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask


def unwritable(folder: Path, error: Exception) -> InputError:
    """Return the error for a folder that cannot be written, with the reason."""
    reason = (error.strerror if isinstance(error, OSError) else None) or str(error)
    return InputError(folder, None, f"cannot be written to ({reason})", "give a folder that can be written")
