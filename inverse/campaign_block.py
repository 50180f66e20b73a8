"""One block of runs: what is sent to a worker, what it computes, and what comes back.

Everything goes both ways as plain values, so that a worker may be a process beside or a machine elsewhere. A
block knows nothing of other blocks: however runs are shared out, each comes to the same result.
"""

import copyreg
import io
import json
import math
import pickle
import re
import tempfile
import time
import warnings
from collections.abc import Mapping
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path
from types import MappingProxyType
from typing import Any

from finback.errors import FinbackError

DIGITS = 8  # significant ones in a result: more than any number here has, fewer than rounding leaves
_OWN_PLACE = re.compile(r'^(row [0-9]+(, )?|run ".*")')
LONGEST_REASON = 400


@dataclass(frozen=True, slots=True)
class Block:
    """Some runs of one table.

    `setting`: rig and columns, packed by `pack`; `seed`; `keep`, whether posteriors are wanted; `runs`: key,
    name and the cells of the sensors, for each.
    """

    setting: bytes
    seed: int
    keep: bool
    runs: tuple[tuple[bytes, str, tuple[str, ...]], ...]


@dataclass(frozen=True, slots=True)
class Record:
    """What came of one run: its key, the result as JSON, and its posterior as netCDF where that is wanted.

    `lasting`: whether the result would come out the same again.
    """

    key: bytes
    result: str
    lasting: bool = True
    posterior: bytes | None = None


@dataclass(frozen=True, slots=True)
class Answer:
    """The records of a block, and how long they took [s]."""

    records: tuple[Record, ...]
    seconds: float


def pack(rig: Any, columns: Any, decimal_comma: bool) -> bytes:
    """Return a rig and the columns of a table as bytes that `compute` unpacks.

    Argument: columns, of which the sensors count, in the order of the cells.
    """
    packed = io.BytesIO()
    _Pickler(packed, protocol=5).dump((rig, columns, decimal_comma))
    return packed.getvalue()


class _Pickler(pickle.Pickler):
    """A pickler that knows read-only mappings, which a rig is full of."""

    dispatch_table = copyreg.dispatch_table.copy()
    dispatch_table[MappingProxyType] = lambda mapping: (_read_only, (dict(mapping),))


def _read_only(mapping: dict[Any, Any]) -> MappingProxyType[Any, Any]:
    """Return a read-only view, whose own type has no name to be unpickled by."""
    return MappingProxyType(mapping)


@lru_cache(maxsize=8)
def _unpacked(setting: bytes) -> Any:
    return pickle.loads(setting)  # noqa: S301  # packed by `pack`, and sent by who started this worker


def compute(block: Block) -> Answer:
    """Compute the runs of a block. A run that fails is a result with a reason, never an exception."""
    start = time.perf_counter()
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # what an engineer must know is a finding
        records = tuple(_record(block, *run) for run in block.runs)
    return Answer(records, time.perf_counter() - start)


def _record(block: Block, key: bytes, name: str, cells: tuple[str, ...]) -> Record:
    from finback import quick
    from finback.readings import Readings, values_of

    rig, columns, decimal_comma = _unpacked(block.setting)
    try:
        values = values_of(columns, name, (0, cells), decimal_comma, None)
        found = quick.estimate(rig, Readings(name, values), block.seed)
    except FinbackError as error:
        return failed(key, _reason(error))
    except MemoryError:
        return failed(key, "the memory of its worker was too small", lasting=False)
    except Exception as error:  # noqa: BLE001  # a run that meets a defect must not take the others with it
        return failed(key, f"it could not be computed ({type(error).__name__}: {error})"[:LONGEST_REASON])
    posterior = _netcdf(rig, name, found, block.seed) if block.keep else None
    return Record(key, _json(_contents(found, rig)), posterior=posterior)


def failed(key: bytes, reason: str, *, lasting: bool = True) -> Record:
    """Return the record of a run that failed, with the reason; `lasting`: whether it would fail again."""
    return Record(key, _json({"status": "failed", "reason": reason}), lasting)


def _reason(error: FinbackError) -> str:
    """Return what is wrong with a run, without the place of its row: the same wherever that stands."""
    problem = getattr(error, "problem", None)
    if problem is None:
        return str(error)
    place = _OWN_PLACE.sub("", getattr(error, "place", None) or "")
    return f"{place}: {problem}; {error.remedy}" if place else f"{problem}; {error.remedy}"  # type: ignore[attr-defined]


def _uncertainty(row: Any, rig: Any) -> float:
    """Return the standard uncertainty of a reading; of one that was set aside, as its sensor is stated.

    It is 0 for a heater that only limits the heat: what it reads is expected to be more.
    """
    if row.place == "heater" and not rig.losses_stated:
        return 0.0
    if row.excluded is None:
        return float(row.uncertainty)
    sensor = rig.sensors[row.sensor]
    noise = (sensor.noise or 0.0) + (sensor.noise_relative or 0.0) * abs(row.measured)
    return math.hypot(max(noise, row.uncertainty), sensor.calibration_at(row.measured))


def _contents(found: Any, rig: Any) -> dict[str, Any]:
    best = found.scores[0]
    return {
        "status": found.status,
        "quantities": {
            name: [_rounded(v) for v in (s.median, s.sd, s.low95, s.high95)]
            for name, s in found.found.items()
        },
        "best": [best.name, _rounded(best.probability)],
        "findings": [[f.code, f.severity, f.sensor, f.message] for f in found.findings],
        "residuals": {
            row.sensor: [_short(row.residual), _short(row.residual / uncertainty)]
            for row in found.table
            if (uncertainty := _uncertainty(row, rig)) > 0
        },
        "aside": [row.sensor for row in found.table if row.excluded is not None],
        "sampled": found.sampler.ess_min is not None,
    }


def _rounded(value: float | None) -> float | None:
    return None if value is None else float(f"{value:.{DIGITS}g}")


def _short(value: float) -> float:
    """Return a residual with four figures: it is for averages over runs."""
    return float(f"{value:.4g}")


def _json(contents: Mapping[str, Any]) -> str:
    return json.dumps(contents, allow_nan=False, ensure_ascii=False, separators=(",", ":"))


def _netcdf(rig: Any, name: str, found: Any, seed: int) -> bytes:
    """Return the averaged draws of a run as the content of a netCDF file, in reported units."""
    from finback import diagnostics, summaries

    kept = {each: found.mixture.values[each] for each in found.found if each in found.mixture.values}
    units = {each: summaries.describe(each)[1] for each in kept}
    tree = diagnostics.tree(
        {
            "posterior": {each: summaries.to_reported(each, values) for each, values in kept.items()},
            "sample_stats": {"candidate": found.mixture.which.astype(float)},
        },
        (),
        {
            "rig": rig.title,
            "run": name,
            "seed": str(seed),
            "candidates": "; ".join(score.name for score in found.scores),
            "units": "; ".join(f"{each}: {unit}" for each, unit in units.items()),
        },
    )
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "posterior.nc"
        tree.to_netcdf(str(path), engine="h5netcdf")
        return path.read_bytes()
