"""The table of a campaign: results.csv and results.parquet, one row a run, and campaign.json beside them.

Read from the ledger run by run, so that a million of them need no more memory than ten. The order is that of
the runs' names as people count, whatever file, block or worker a run went through, and every number is
written in one way: the same campaign gives the same bytes.
"""

import csv
import json
import os
import tempfile
from collections.abc import Iterator, Mapping, Sequence
from contextlib import ExitStack, contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import finback
from finback.analysis import PARAMETERS
from finback.campaign import LEDGER, Campaign, Source
from finback.campaign_digest import FIGURES, Digest
from finback.derived import DERIVED
from finback.errors import ComputationError, InputError
from finback.ledger import Entry, Ledger
from finback.summaries import describe
from finback.table import to_number

CSV, PARQUET, ABOUT, REPORT = OURS = ("results.csv", "results.parquet", "campaign.json", "report.html")
FIRST, LAST = ("run", "status"), ("best_candidate", "best_probability", "findings", "message", "rig")
ROWS = 5000  # of a row group of the parquet file
PENDING = "it was not computed"


@dataclass(frozen=True)
class Columns:
    """The columns of the table: `quantities`, in the order of estimate.json, and the tables' own, `extra`.

    `shown`: the name of each of those in the table; `numeric`: those that hold numbers alone.
    """

    quantities: tuple[str, ...]
    extra: tuple[str, ...]
    shown: tuple[str, ...]
    numeric: frozenset[str]

    @property
    def names(self) -> tuple[str, ...]:
        """Every column, in order."""
        figures = (f"{name}_{figure}" for name in self.quantities for figure in FIGURES)
        return (*FIRST, *figures, *LAST, *self.shown)

    @property
    def units(self) -> dict[str, str]:
        """The unit of each column that has one."""
        return {f"{name}_{figure}": _unit(name, figure) for name in self.quantities for figure in FIGURES}


def _unit(name: str, figure: str) -> str:
    unit = describe(name)[1]
    return "K" if figure == "sd" and unit == "degC" else unit


def prepare(folder: Path, force: bool = False) -> None:
    """Make sure that a campaign can be written to a folder, before anything is computed; create the folder.

    Arguments: folder; force, whether to start anew there: an earlier campaign's ledger is removed.
    Raises InputError where it holds results without their ledger, which would be lost, or cannot be written.
    """
    ledger = folder / LEDGER
    earlier = [name for name in OURS if os.path.lexists(folder / name)]
    if earlier and not ledger.exists() and not force:
        problem = f"already holds {earlier[0]}, and no ledger that it is from"
        raise InputError(folder, None, problem, "choose another folder, or overwrite with --force")
    try:
        folder.mkdir(parents=True, exist_ok=True)
        with tempfile.TemporaryFile(dir=folder):
            pass
        if force:
            for end in ("", "-wal", "-shm"):
                ledger.with_name(ledger.name + end).unlink(missing_ok=True)
    except (OSError, ValueError) as error:
        reason = (error.strerror if isinstance(error, OSError) else None) or str(error)
        problem = f"cannot be written to ({reason})"
        raise InputError(folder, None, problem, "give a folder that can be written") from error


def write(campaign: Campaign) -> Digest:
    """Write results.csv, results.parquet, campaign.json and report.html of a campaign into its folder.

    Returns the digest of it. Raises ComputationError where they cannot be written; earlier ones then stay.
    """
    from finback.report import campaign_page

    folder = campaign.folder
    with Ledger(folder / LEDGER) as ledger:
        digest = Digest(campaign.sources).add_all(ledger.entries(as_read=True))
        columns = _columns(campaign.sources, digest)
        with _written(folder, OURS) as (csv_file, parquet_file, about, report):
            _write_tables(ledger, campaign.sources, columns, csv_file, parquet_file)
            contents = json.dumps(_about(campaign, columns, digest), ensure_ascii=False, indent=2)
            about.write_text(contents + "\n", encoding="utf-8", newline="\n")
            page = campaign_page.render(campaign, digest, ledger)
            report.write_text(page, encoding="utf-8", newline="\n")
    return digest


def _columns(sources: Sequence[Source], digest: Digest) -> Columns:
    known = (*PARAMETERS, *DERIVED)
    quantities = tuple(name for name in known if name in digest.quantities)
    extra = tuple(dict.fromkeys(name for source in sources for name in source.extra))
    ours = {*FIRST, *LAST, *(f"{name}_{figure}" for name in quantities for figure in FIGURES)}
    shown = tuple(f"{name} (readings)" if name in ours else name for name in extra)
    return Columns(quantities, extra, shown, frozenset(set(extra) - digest.texts))


def _write_tables(
    ledger: Ledger, sources: Sequence[Source], columns: Columns, csv_path: Path, parquet_path: Path
) -> None:
    import pyarrow as pa
    from pyarrow import parquet

    schema = _schema(columns)
    are_numbers = [name in columns.numeric for name in columns.extra]
    with ExitStack() as stack:
        text = stack.enter_context(csv_path.open("w", encoding="utf-8", newline=""))
        rows = csv.writer(text, lineterminator="\n")
        rows.writerow(columns.names)
        writer = stack.enter_context(parquet.ParquetWriter(str(parquet_path), schema))
        group: list[list[Any]] = []
        for entry in ledger.entries():
            row = _row(entry, sources[entry.source], columns)
            source = sources[entry.source]
            own = _own(entry, source, columns)
            rows.writerow([*map(_text, row), *own])
            group.append([*row, *_typed(own, source.table.decimal_comma, are_numbers)])
            if len(group) == ROWS:
                writer.write_table(_table(pa, group, schema))
                group.clear()
        if group:
            writer.write_table(_table(pa, group, schema))


def _table(pa: Any, group: Sequence[Sequence[Any]], schema: Any) -> Any:
    arrays = [
        pa.array(column, type=kind.type)
        for column, kind in zip(zip(*group, strict=True), schema, strict=True)
    ]
    return pa.Table.from_arrays(arrays, schema=schema)


def _schema(columns: Columns) -> Any:
    import pyarrow as pa

    units = columns.units
    numbers = {*units, "best_probability"}
    numbers |= {
        shown for name, shown in zip(columns.extra, columns.shown, strict=True) if name in columns.numeric
    }
    return pa.schema(
        [
            pa.field(
                name,
                pa.float64() if name in numbers else pa.string(),
                metadata={"unit": units[name]} if name in units else None,
            )
            for name in columns.names
        ]
    )


def _row(entry: Entry, source: Source, columns: Columns) -> list[Any]:
    """Return one row without the table's own cells: numbers, texts, None for what is not there."""
    result = entry.result or {"status": "failed", "reason": entry.refused or PENDING}
    quantities: Mapping[str, list[float | None]] = result.get("quantities", {})
    nothing: list[float | None] = [None] * len(FIGURES)
    row: list[Any] = [entry.shown, result["status"]]
    for name in columns.quantities:
        row += quantities.get(name, nothing)
    row += result.get("best", (None, None))
    findings = result.get("findings", ())
    row.append(" ".join(dict.fromkeys(code for code, *_ in findings)) or None)
    row.append(
        result.get("reason")
        or " ".join(text for _, gravity, _, text in findings if gravity != "note")
        or None
    )
    row.append(source.rig.title)
    return row


def _own(entry: Entry, source: Source, columns: Columns) -> Sequence[str]:
    """Return the table's own cells, as they stand, in the order of all tables' own columns."""
    if source.extra == columns.extra:
        return entry.extra
    cells = dict(zip(source.extra, entry.extra, strict=True))
    return [cells.get(name, "") for name in columns.extra]


def _typed(own: Sequence[str], decimal_comma: bool, are_numbers: Sequence[bool]) -> list[Any]:
    """Return the tables' own cells as the parquet file has them: numbers as numbers, nothing for nothing."""
    return [
        (_number(cell, decimal_comma) if number else cell) if cell else None
        for cell, number in zip(own, are_numbers, strict=True)
    ]


def _number(cell: str, decimal_comma: bool) -> float | None:
    try:
        return float(cell)  # known to be a number: this is only the quicker way
    except ValueError:
        return to_number(cell, decimal_comma)


def _text(value: Any) -> str:
    if value is None:
        return ""
    return repr(value) if isinstance(value, float) else str(value)


def _about(campaign: Campaign, columns: Columns, digest: Digest) -> dict[str, Any]:
    rigs = {source.rig.sha256: source.rig for source in campaign.sources}
    return {
        "finback": finback.__version__,
        "seed": campaign.seed,
        "runs": digest.runs,
        "status": {name: digest.statuses[name] for name in ("ok", "caution", "failed")},
        "sampled": digest.sampled,
        "findings": dict(sorted(digest.findings.items())),
        "rigs": [
            {
                "title": rig.title,
                "file": None if rig.source is None else rig.source.name,
                "sha256": rig.sha256,
                "assumed": [finding.message for finding in rig.assumed],
            }
            for rig in rigs.values()
        ],
        "readings": [
            {"file": source.label, "sha256": source.table.sha256, "runs": digest.by_source[number]}
            for number, source in enumerate(campaign.sources)
        ],
        "units": columns.units,
    }


@contextmanager
def _written(folder: Path, names: Sequence[str]) -> Iterator[list[Path]]:
    """Yield temporary paths that are moved to these names when all are whole; a failure leaves nothing."""
    temporary: list[Path] = []
    try:
        for name in names:
            for left in folder.glob(f".{name}.*"):  # by a process that was killed while it wrote
                left.unlink()
        for name in names:
            handle, made = tempfile.mkstemp(prefix=f".{name}.", dir=folder)
            os.close(handle)
            temporary.append(Path(made))
        yield temporary
        for path, name in zip(temporary, names, strict=True):
            path.chmod(0o666 & ~_umask())
            path.replace(folder / name)
    except OSError as error:
        raise ComputationError(
            f"{folder}: the tables cannot be written ({error.strerror or error}); the results stay in the "
            "ledger, and the same command writes them once there is room."
        ) from error
    finally:
        for path in temporary:
            path.unlink(missing_ok=True)


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask
