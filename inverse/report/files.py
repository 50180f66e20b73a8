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

from finback.errors import InputError
from finback.estimate import Estimate

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
    text = json.dumps(estimate.to_dict(), allow_nan=False, ensure_ascii=False, indent=2) + "\n"
    draws = estimate.to_tree()

    drawn = {
        f"{FIGURES}/{p.name}{end}": data for p in pictures for end, data in ((".png", p.png), (".svg", p.svg))
    }
    fillers: dict[str, Callable[[Path], object]] = {
        **{name: partial(Path.write_bytes, data=data) for name, data in drawn.items()},
        POSTERIOR: lambda place: draws.to_netcdf(str(place), engine="h5netcdf"),
        REPORT: lambda place: place.write_text(page, encoding="utf-8", newline="\n"),
        ESTIMATE: lambda place: place.write_text(text, encoding="utf-8", newline="\n"),
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


def put(folder: Path, fillers: Mapping[str, Callable[[Path], object]]) -> None:
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
