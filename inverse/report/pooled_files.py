"""What a pooled estimate leaves behind: pooled.json, pooled_runs.csv, and some lines on the terminal."""

import csv
import math
from collections.abc import Sequence
from functools import partial
from pathlib import Path
from typing import Any

import finback
from finback.campaign import Source
from finback.estimate import Summary
from finback.pooled_conclusions import Learnt, Pooled
from finback.report import phrases
from finback.report.files import Filler, of_json, put, unwritable
from finback.report.terminal import wrap

RESULT, RUNS = OURS = ("pooled.json", "pooled_runs.csv")
DIGITS = 8  # significant ones: more than any number here has
MOST_LISTED = 1000  # runs by name in pooled.json; pooled_runs.csv has all
COLUMNS = (
    *("run", "use", "h_pooled_median", "h_pooled_sd", "h_pooled_low95", "h_pooled_high95"),
    *("chi_square", "degrees_of_freedom", "message"),
)


def write(found: Pooled, sources: Sequence[Source], folder: Path) -> None:
    """Write pooled.json and pooled_runs.csv into a folder. Raises InputError where that cannot be done."""
    fillers: dict[str, Filler] = {
        RUNS: partial(_write_runs, found=found),
        RESULT: of_json(contents(found, sources)),
    }
    try:
        put(folder, fillers)
    except OSError as error:
        raise unwritable(folder, error) from error


def contents(found: Pooled, sources: Sequence[Source]) -> dict[str, Any]:
    """Return the contents of pooled.json; a number that is not determined is None."""
    runs = found.runs
    left_out = [
        (n, r) for n, u, r in zip(runs.names, runs.uses, runs.reasons, strict=True) if u == "left out"
    ]
    calibrations = [n for n, u in zip(runs.names, runs.uses, strict=True) if u == "calibration"]
    used = [u != "left out" for u in runs.uses]
    determined = [name for name in found.pool.share if found.shared[name].median is not None]
    return {
        "finback": finback.__version__,
        "rig": found.pool.rig.title,
        "status": found.status,
        "shared": {name: _numbers(summary) for name, summary in found.shared.items()},
        "correlation": {
            one: {other: _rounded(found.correlation[i, j]) for j, other in enumerate(determined)}
            for i, one in enumerate(determined)
        },
        "noise": None if found.noise is None else _numbers(found.noise),
        "offsets": [_learnt(each, "sensor") for each in found.offsets],
        "holes": [_learnt(each, "sensor") for each in found.holes],
        "lengths": [_learnt(each, "length") for each in found.lengths],
        "h_shared_sd": _rounded(found.h_shared_sd),
        "candidates": [
            {"name": name, "probability": _rounded(probability), "log_evidence": _rounded(log)}
            for name, probability, log in found.candidates
        ],
        "runs": runs.uses.count("run"),
        "calibration_runs": calibrations[:MOST_LISTED],
        "n_calibration_runs": len(calibrations),
        "left_out": [{"run": name, "reason": reason} for name, reason in left_out[:MOST_LISTED]],
        "n_left_out": len(left_out),
        "fit": {
            "chi_square": _rounded(float(runs.chi_square[used].sum())),
            "degrees_of_freedom": _rounded(float(runs.freedom[used].sum())),
        },
        "sampler": {
            "draws": found.draws,
            "khat": _rounded(found.khat),
            "efficiency": _rounded(found.efficiency),
        },
        "findings": [
            {"code": f.code, "severity": f.severity, "sensor": f.sensor, "message": f.message}
            for f in found.findings
        ],
        "provenance": {
            "seed": found.seed,
            "rig": found.pool.rig.sha256,
            "readings": {source.label: source.table.sha256 for source in sources},
        },
    }


def _numbers(summary: Summary) -> dict[str, Any]:
    names = ("median", "mean", "sd", "low95", "high95")
    determined = summary.median is not None
    return {
        "unit": summary.unit,
        **{name: _rounded(getattr(summary, name)) for name in names},
        "determined_by": summary.determined_by if determined else None,
    }


def _learnt(each: Learnt, of: str) -> dict[str, Any]:
    numbers = {name: _rounded(getattr(each, name)) for name in ("mean", "sd", "stated")}
    return {of: each.name, "unit": each.unit, **numbers}


def _rounded(value: float | None) -> float | None:
    return None if value is None or not math.isfinite(value) else float(f"{value:.{DIGITS}g}")


def _write_runs(place: Path, found: Pooled) -> None:
    """Write a row a run, in the order of results.csv."""
    runs = found.runs
    numbers = (
        *(runs.h_median, runs.h_sd, runs.h_low95, runs.h_high95),
        *(runs.chi_square, runs.freedom),
    )
    with place.open("w", encoding="utf-8", newline="") as text:
        rows = csv.writer(text, lineterminator="\n")
        rows.writerow(COLUMNS)
        for i, (name, use, reason) in enumerate(zip(runs.names, runs.uses, runs.reasons, strict=True)):
            shown = [_rounded(float(column[i])) for column in numbers]
            rows.writerow([name, use, *("" if v is None else repr(v) for v in shown), reason or ""])


def summary(found: Pooled, folder: Path) -> str:
    """Return what all runs share as text within 80 columns, paths aside."""
    uses = found.runs.uses
    counts = (
        f"{uses.count('run')} runs, {uses.count('calibration')} isothermal, {uses.count('left out')} left out"
    )
    lines = ["", f"Shared by all runs ({counts})"]
    for each in found.shared.values():
        known = f", 95 % in {phrases.interval(each)}" if each.median is not None else ""
        lines += wrap(f"{each.label}: {phrases.value(each)}{known}", "    ", "  ")
    for finding in found.findings:
        if finding.severity != "note":
            lines += wrap(f"{finding.code}: {phrases.clean(finding.message, 1000)}", "    ", "  ")
    shown = phrases.clean(str(folder / RESULT), 1000)
    return "\n".join([*lines, "", f"Shared  {shown}"])
