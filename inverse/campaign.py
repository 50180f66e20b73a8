"""Campaigns: many runs of one rig or of several, each a full posterior by the fast route.

What `finback batch` does is one call of `run` here: look the tables through, set the runs down in the ledger,
share out those that have no result, and put in what comes back, block by block. Nothing that was put in is
computed again.
"""

import hashlib
import json
import re
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, replace
from pathlib import Path
from time import monotonic
from typing import Any

import finback
from finback import campaign_block, readings_stream
from finback import rig as rig_file
from finback.campaign_block import Block, Record
from finback.campaign_workers import Cluster, Dispatcher, Pool, Processes
from finback.columns import Columns
from finback.errors import ComputationError, InputError, StoppedError
from finback.ledger import Ledger, Pending, PlannedRun
from finback.readings import is_run_name
from finback.readings_stream import TableFile
from finback.rig import Rig

LEDGER, POSTERIORS = "ledger.sqlite", "posteriors"
RIG_SUFFIX = ".toml"
METHOD = 1
"""Goes up whenever a change of the code changes results, so that older ones are computed again."""

Progress = Callable[[int, int, float | None], None]
"""Called with the runs that are done, how many there are, and the runs a second, None at first."""


@dataclass(frozen=True)
class Source:
    """One table of readings with the rig that it was read on; `label` tells it apart from the others."""

    rig: Rig
    table: TableFile
    label: str

    @property
    def extra(self) -> tuple[str, ...]:
        """Names of the table's own columns."""
        return tuple(self.table.columns.extra)

    def identity(self, seed: int) -> str:
        """Return a digest of what all results of this table hang on."""
        columns = [(column.sensor.name, column.unit) for column in self.table.columns.sensors]
        shape = None if self.rig.shape_file is None else self.rig.shape_file.sha256
        parts = [finback.__version__, METHOD, seed, self.rig.sha256, shape, columns, self.table.decimal_comma]
        return hashlib.sha256(json.dumps(parts).encode()).hexdigest()

    def planned(self, number: int, seed: int) -> Iterator[PlannedRun]:
        """Yield the runs of the table, those that cannot be computed with the reason."""
        columns, identity, width = self.table.columns, self.identity(seed), self.table.width
        own = tuple(columns.extra.values())
        for count, row in enumerate(self.table.rows(), start=1):
            whole = row[1] + ("",) * (width - len(row[1]))
            name = str(count) if columns.run is None else whole[columns.run]
            cells = tuple([whole[column.index] for column in columns.sensors])
            extra = tuple([whole[at] for at in own])
            key = hashlib.blake2b(json.dumps([identity, name, cells]).encode(), digest_size=16).digest()
            refused = None
            if not is_run_name(name):
                refused = "this run has no proper name; write one of 1 to 120 printable characters"
                name = _made_harmless(name)
            elif any(whole[width:]):
                refused = "its row has more cells than the header; write one cell a column"
            yield PlannedRun(number, row[0], name, key, cells, extra, refused)


def _made_harmless(name: str) -> str:
    """Return what a table shows for a name that is none."""
    return re.sub(r"\s+", " ", "".join(c if c.isprintable() else "?" for c in name[:40])) or "(no name)"


@dataclass(frozen=True)
class Campaign:
    """A campaign that was computed: its sources in a fixed order, seed, folder, and how many runs it has.

    `found`: those whose results were in the ledger already.
    """

    sources: tuple[Source, ...]
    seed: int
    folder: Path
    runs: int
    found: int
    seconds: float


def read(paths: Sequence[Path]) -> tuple[Source, ...]:
    """Read the rigs and look through the tables of a campaign.

    Argument: paths, a rig file followed by its readings, once or several times. The order of the tables has
    no part in anything that follows. Raises InputError for the first thing that is wrong.
    """
    rig: Rig | None = None
    found: list[tuple[Rig, Path]] = []
    bare: Path | None = None
    for path in paths:
        if path.suffix.lower() == RIG_SUFFIX:
            if bare is not None:
                break
            rig, bare = rig_file.read(path), path
        elif rig is None:
            remedy = "name the rig first, as in: finback batch rig.toml readings.csv"
            raise InputError(path, None, "readings stand before any rig file (.toml)", remedy)
        else:
            found.append((rig, path))
            bare = None
    if bare is not None or not found:
        raise InputError(bare, None, "no readings follow this rig", "name at least one table of readings")
    given = [path.resolve() for _, path in found]
    for number, path in enumerate(given):
        if path in given[:number]:
            raise InputError(found[number][1], None, "this table is given twice", "name it once")
    names = [path.name for _, path in found]
    sources = [
        Source(
            rig,
            readings_stream.look_through(path, rig),
            path.name if names.count(path.name) == 1 else str(path),
        )
        for rig, path in found
    ]
    return tuple(sorted(sources, key=lambda source: source.label))


def run(
    sources: Sequence[Source],
    folder: Path,
    *,
    seed: int = 1,
    pool: Pool,
    block: int | None = None,
    keep_posteriors: bool = False,
    progress: Progress | None = None,
) -> Campaign:
    """Compute every run of a campaign that has no result yet.

    Arguments: sources, as `read` returns them; folder of the ledger, which exists; seed; pool, what computes
    the blocks; block, runs in one, as many as take a second or two if left out; keep_posteriors; progress.

    Raises InputError where the ledger belongs to another campaign, ComputationError where it cannot be
    written, and StoppedError after an interrupt: what was put in stays, and the next call goes on from there.
    """
    with Ledger(folder / LEDGER) as ledger:
        _check_same(ledger, sources, seed)
        runs = (each for number, source in enumerate(sources) for each in source.planned(number, seed))
        ledger.plan(_digest(sources, seed), [source.label for source in sources], runs)
        ledger.forget_failures()
        total, found = ledger.counts(keep_posteriors)
        start, done = monotonic(), found
        with _explained(ledger, keep_posteriors):
            dispatcher = Dispatcher(pool, _taker(ledger, sources, seed, keep_posteriors), block)
            for sent, records in dispatcher.answers():
                _put_in(ledger, folder, sent, records)
                done += len(records)
                if progress is not None:
                    progress(done, total, (done - found) / max(monotonic() - start, 1e-9))
        return Campaign(tuple(sources), seed, folder, total, found, monotonic() - start)


def _check_same(ledger: Ledger, sources: Sequence[Source], seed: int) -> None:
    """Refuse to go on in the folder of another campaign, whose table would be lost."""
    rigs = sorted({source.rig.sha256 or "" for source in sources})
    if ledger.belongs_to(json.dumps([seed, rigs])):
        return
    problem = "this folder holds a campaign of another rig, or of another seed"
    raise InputError(ledger.path.parent, None, problem, "choose another folder, or start anew with --force")


def _digest(sources: Sequence[Source], seed: int) -> str:
    """Return a digest of all that the plan follows from."""
    parts = [(source.label, source.table.sha256, source.identity(seed)) for source in sources]
    return hashlib.sha256(json.dumps(parts).encode()).hexdigest()


def _taker(ledger: Ledger, sources: Sequence[Source], seed: int, keep: bool) -> Callable[[int], Block | None]:
    """Return what hands out the runs without a result, block after block."""
    settings = [
        campaign_block.pack(source.rig, sensors_alone(source.table.columns), source.table.decimal_comma)
        for source in sources
    ]
    last = 0

    def take(most: int) -> Block | None:
        nonlocal last
        pending: list[Pending] = ledger.pending(last, most, keep)
        if not pending:
            return None
        last = pending[-1].number
        runs = tuple((each.key, each.name, each.cells) for each in pending)
        return Block(settings[pending[0].source], seed, keep, runs)

    return take


def sensors_alone(columns: Columns) -> Columns:
    """Return the columns of a row that holds the sensors' cells alone, in their order."""
    moved = tuple(replace(column, index=at) for at, column in enumerate(columns.sensors))
    return Columns(moved, None, {})


def _put_in(ledger: Ledger, folder: Path, block: Block, records: Sequence[Record]) -> None:
    """Put the results of a block into the ledger, once their posteriors are on disk."""
    names = {key: name for key, name, _ in block.runs}
    for record in records:
        if record.posterior is not None:
            _write(folder / POSTERIORS / posterior_name(names[record.key], record.key), record.posterior)
    ledger.acknowledge((r.key, r.result, r.lasting, block.keep) for r in records)


def posterior_name(run: str, key: bytes) -> str:
    """Return the name of the file that holds the posterior of a run."""
    return f"{re.sub(r'[^A-Za-z0-9._-]+', '-', run)[:60].strip('.-') or 'run'}-{key.hex()[:8]}.nc"


def _write(path: Path, content: bytes) -> None:
    try:
        path.parent.mkdir(exist_ok=True)
        temporary = path.with_suffix(".part")
        temporary.write_bytes(content)
        temporary.replace(path)
    except OSError as error:
        raise ComputationError(
            f"{path}: the posterior cannot be written ({error.strerror}); what was done before stays, and "
            "the same command goes on from there."
        ) from error


@contextmanager
def _explained(ledger: Ledger, keep: bool) -> Iterator[None]:
    """Say how far a campaign came that is interrupted."""
    try:
        yield
    except KeyboardInterrupt:
        total, done = ledger.counts(keep)
        raise StoppedError(
            f"interrupted: {done} of {total} runs are done and kept; the same command goes on from there."
        ) from None


def processes(workers: int) -> Pool:
    """Return worker processes of this machine."""
    return Processes(workers)


def cluster(address: str, patience: float = 10.0) -> Pool:
    """Return the workers of a dask cluster, by the address of its scheduler and the seconds to wait for it.

    Raises InputError where dask is not installed or nobody answers.
    """
    try:
        import distributed
    except ImportError:
        problem, remedy = (
            "dask.distributed is not installed",
            "install finback with its extra: finback[cluster]",
        )
        raise InputError(None, "--scheduler", problem, remedy) from None
    try:
        client: Any = distributed.Client  # whose types are no strict ones
        return Cluster(client(address, timeout=patience, set_as_default=False))
    except (OSError, ValueError, TimeoutError) as error:
        problem = f"no scheduler answers at {address} ({' '.join(str(error).split())[:120]})"
        raise InputError(
            None, "--scheduler", problem, "give the address that dask-scheduler printed"
        ) from None
