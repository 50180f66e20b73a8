"""The command line: `fit`, `diagnose`, `batch`, `correlate`, `check` and `demo`. The only module that prints.

Results go to standard output; errors and progress to standard error. Nothing heavy is imported at the top, so
that `finback --help` answers at once. Exit status: 0 done, 1 the computation failed, 2 the input is wrong,
130 interrupted.
"""

import os
import sys
import warnings
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from finback import __version__
from finback.errors import FinbackError, InputError
from finback.wording import plain, quoted

if TYPE_CHECKING:
    from finback.campaign import Source
    from finback.pooled_runs import Pool
    from finback.readings import Readings
    from finback.rig import Rig

INTERRUPTED = 130
LONGEST = 5000  # characters of a complaint, which may name a long path
DEMO_FOLDER = Path("finback-demo")
DEMO_RIG = "bench-pin"

USAGE_ERROR: type[Exception] = typer.BadParameter.__mro__[1]
"""What typer raises for a command line it cannot read; typer has no public name for it."""

app = typer.Typer(
    help="Work back from temperatures along a fin to h, k and the joint at its base, with their uncertainty.",
    add_completion=False,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
)

RigFile = Annotated[Path, typer.Argument(metavar="RIG", help="The rig file, rig.toml.")]
ReadingsFile = Annotated[Path, typer.Argument(metavar="READINGS", help="The readings, .csv or .xlsx.")]
RunName = Annotated[
    str | None, typer.Option("--run", metavar="NAME", help="The run, where there are several.")
]
Seed = Annotated[int, typer.Option("--seed", metavar="N", min=0, help="Seed of the random draws.")]
Quiet = Annotated[bool, typer.Option("--quiet", help="Print nothing but errors.")]
Force = Annotated[bool, typer.Option("--force", help="Overwrite an earlier result in the folder.")]


def _show_version(wanted: bool) -> None:
    if wanted:
        print(f"finback {__version__}")
        raise typer.Exit


@app.callback()
def options(
    _version: Annotated[
        bool,
        typer.Option("--version", callback=_show_version, is_eager=True, help="Show the version and exit."),
    ] = False,
) -> None:
    """Take the options that stand before a command."""


@app.command()
def fit(
    rig_file: RigFile,
    readings_file: ReadingsFile,
    out: Annotated[Path, typer.Option("--out", metavar="DIR", help="The folder to write the result to.")],
    run: RunName = None,
    as_read: Annotated[
        bool, typer.Option("--as-read", help="Take every reading as it stands, wrong ones too.")
    ] = False,
    seed: Seed = 1,
    quiet: Quiet = False,
    force: Force = False,
) -> int:
    """Estimate h, k and the joint of one run and write the report."""
    rig, readings = _read(rig_file, readings_file, run)
    return _fit_into(out, rig, readings, seed=seed, quiet=quiet, force=force, as_read=as_read)


@app.command()
def diagnose(
    rig_file: RigFile,
    readings_file: ReadingsFile,
    out: Annotated[Path, typer.Option("--out", metavar="DIR", help="The folder to write the result to.")],
    run: RunName = None,
    seed: Seed = 1,
    quiet: Quiet = False,
    force: Force = False,
) -> int:
    """Tell why a fin does less than it should, and what to do."""
    from finback import diagnosis
    from finback.report import diagnosis_files, diagnosis_terminal

    rig, readings = _read(rig_file, readings_file, run)
    diagnosis_files.prepare(out, force)
    with _progress(quiet) as progress:
        found = diagnosis.diagnose(rig, readings, seed=seed, progress=progress)
        if progress is not None:
            progress("writing the report", 1.0)
        diagnosis_files.write(found, out, force)
    if not quiet:
        print(diagnosis_terminal.summary(found, out))
    return 0


@app.command()
def batch(
    inputs: Annotated[
        list[Path],
        typer.Argument(metavar="RIG READINGS...", help="A rig file and its readings; then others likewise."),
    ],
    out: Annotated[Path, typer.Option("--out", metavar="DIR", help="The folder to write the results to.")],
    workers: Annotated[
        int | None,
        typer.Option("--workers", metavar="N", min=1, help="Processes that share the work; one a processor."),
    ] = None,
    block: Annotated[
        int | None,
        typer.Option("--block", metavar="N", min=1, help="Runs sent out at a time; by the time they take."),
    ] = None,
    scheduler: Annotated[
        str | None,
        typer.Option("--scheduler", metavar="ADDRESS", help="Send the work to this dask scheduler instead."),
    ] = None,
    keep_posteriors: Annotated[
        bool, typer.Option("--keep-posteriors", help="Write the posterior of every run as well.")
    ] = False,
    share: Annotated[
        str | None,
        typer.Option("--share", metavar="NAMES", help="Estimate once for all runs as well, such as k,joint."),
    ] = None,
    seed: Seed = 1,
    quiet: Quiet = False,
    force: Annotated[
        bool, typer.Option("--force", help="Start anew, and overwrite earlier results.")
    ] = False,
) -> int:
    """Estimate every run of one or several tables, and resume."""
    from contextlib import closing

    from finback import campaign, campaign_table
    from finback.report import campaign_terminal

    sources = campaign.read(inputs)
    pool_of_runs = None if share is None else _pool_of(sources, share)
    campaign_table.prepare(out, force)
    pool = campaign.cluster(scheduler) if scheduler else campaign.processes(workers or os.cpu_count() or 1)
    with closing(pool), _campaign_progress(quiet) as progress:
        done = campaign.run(
            sources,
            out,
            seed=seed,
            pool=pool,
            block=block,
            keep_posteriors=keep_posteriors,
            progress=progress,
        )
    digest = campaign_table.write(done)
    if not quiet:
        print(campaign_terminal.summary(done, digest))
    if pool_of_runs is not None:
        from finback import pooled
        from finback.report import pooled_files

        found = pooled.estimate(pool_of_runs, seed)
        pooled_files.write(found, sources, out)
        if not quiet:
            print(pooled_files.summary(found, out))
    return 0 if digest.runs > digest.statuses["failed"] else 1


@app.command()
def check(
    rig_file: RigFile,
    readings_file: Annotated[
        Path | None, typer.Argument(metavar="READINGS", help="The readings, .csv or .xlsx.")
    ] = None,
) -> None:
    """Read everything, compute nothing; show what was understood."""
    from finback import candidates, checks, overview
    from finback import readings as readings_reader
    from finback import rig as rig_reader

    rig = rig_reader.read(rig_file)
    runs = None
    if readings_file is not None:
        runs = []
        for readings in readings_reader.read(readings_file, rig):
            checks.check_run(rig, readings)
            runs.append(readings.run)
    compared = [each.name for each in candidates.enumerate_candidates(rig)]
    print(overview.describe(rig, runs, compared, candidates.why_compared(rig)))


@app.command()
def correlate(
    results: Annotated[
        Path, typer.Argument(metavar="RESULTS", help="The results of many runs, .csv, .parquet or .xlsx.")
    ],
    out: Annotated[Path, typer.Option("--out", metavar="DIR", help="The folder to write the result to.")],
    rig_file: Annotated[
        Path | None,
        typer.Option("--rig", metavar="RIG", help="The rig file, for Nu, Re and Ra."),
    ] = None,
    form: Annotated[
        str | None, typer.Option("--form", metavar="FORM", help="reynolds, rayleigh or speed; else chosen.")
    ] = None,
    speed: Annotated[
        str | None, typer.Option("--speed", metavar="COLUMN", help="The column of the air's speed.")
    ] = None,
    speed_uncertainty: Annotated[
        str | None,
        typer.Option("--speed-uncertainty", metavar="SD", help='Standard uncertainty, "5 %" or "0.1 m/s".'),
    ] = None,
    shared_h: Annotated[
        str | None,
        typer.Option("--shared-h", metavar="SD", help='Part in h that all runs share, "3 %".'),
    ] = None,
    shared_speed: Annotated[
        str | None,
        typer.Option("--shared-speed", metavar="SD", help='Part in speed that all runs share, "2 %".'),
    ] = None,
    seed: Seed = 1,
    quiet: Quiet = False,
    force: Force = False,
) -> int:
    """Fit a law such as Nu = C Re^n Pr^(1/3) through many runs."""
    from finback import correlate as correlating
    from finback import results as results_reader
    from finback import rig as rig_reader
    from finback import run_points
    from finback.report import correlation, correlation_files

    stated = run_points.parse(speed, speed_uncertainty, shared_h, shared_speed)
    chosen = run_points.parse_form(form)
    rig = None if rig_file is None else rig_reader.read(rig_file)
    results_reader.header(results)  # before a folder is made for what cannot be read
    correlation_files.prepare(out, force)
    found = correlating.correlate(results, rig, chosen, stated, seed)
    page = correlation_files.write(found, out, force)
    if not quiet:
        print(correlation.summary(found, str(page)))
    return 0


@app.command()
def demo(
    folder: Annotated[Path, typer.Argument(metavar="DIR", help="The folder to write to.")] = DEMO_FOLDER,
    name: Annotated[str, typer.Option("--rig", metavar="NAME", help="Which bundled rig to take.")] = DEMO_RIG,
    listing: Annotated[bool, typer.Option("--list", help="List the bundled rigs and exit.")] = False,
    seed: Seed = 1,
    quiet: Quiet = False,
    force: Force = False,
) -> int:
    """Write a bundled rig to a folder and estimate it there."""
    from finback import datasets

    if listing:
        width = max(len(each) for each in datasets.names())
        for each in datasets.names():
            print(f"{each:{width}}  {datasets.title(each)}")
        return 0
    if name not in datasets.names():
        known = ", ".join(datasets.names())
        raise InputError(None, "--rig", f"there is no bundled rig {quoted(name)}", f"choose one of {known}")

    from finback.report import files

    taken = [each for each in datasets.file_names(name) if (folder / each).exists()]
    if taken and not force:
        raise InputError(
            folder,
            None,
            f"already holds {' and '.join(taken)}",
            "choose another folder, or overwrite with --force",
        )
    files.prepare(folder, force)
    datasets.copy(name, folder)
    rig, readings = _read(folder / "rig.toml", folder / "readings.csv", None)
    return _fit_into(folder, rig, readings, seed=seed, quiet=quiet, force=True)


def _pool_of(sources: "Sequence[Source]", share: str) -> "Pool":
    """Return the runs of a campaign that are estimated together."""
    from finback import pooled_runs

    return pooled_runs.gather(sources, pooled_runs.parse(share, [source.rig for source in sources]))


def _read(rig_file: Path, readings_file: Path, run: str | None) -> "tuple[Rig, Readings]":
    """Return a rig and the readings of one run of it."""
    from finback import readings, rig

    found = rig.read(rig_file)
    return found, readings.read(readings_file, found).pick(run)


def _fit_into(
    folder: Path,
    rig: "Rig",
    readings: "Readings",
    *,
    seed: int,
    quiet: bool,
    force: bool,
    as_read: bool = False,
) -> int:
    """Fit, write the result to the folder and print the summary; return the exit status."""
    from finback import analysis
    from finback.report import files, terminal

    files.prepare(folder, force)
    with _progress(quiet) as progress:
        estimate = analysis.fit(rig, readings, seed=seed, progress=progress, as_read=as_read)
        if progress is not None:
            progress("writing the report", 1.0)
        files.write(estimate, folder, force)
    if not quiet:
        print(terminal.summary(estimate, folder))
    return 1 if estimate.status == "failed" else 0


@contextmanager
def _progress(quiet: bool) -> Iterator[Callable[[str, float], None] | None]:
    """Yield a callable (stage, fraction) that draws a bar on standard error, or None where nobody watches."""
    if quiet or not sys.stderr.isatty():
        yield None
        return
    from rich.console import Console
    from rich.progress import BarColumn, Progress, TaskProgressColumn, TextColumn

    columns = TextColumn("{task.description:<24}", markup=False), BarColumn(), TaskProgressColumn()
    with Progress(*columns, console=Console(stderr=True), transient=True) as bar:
        task = bar.add_task("reading", total=1.0)
        yield lambda stage, fraction: bar.update(task, description=stage, completed=fraction)


@contextmanager
def _campaign_progress(quiet: bool) -> Iterator[Callable[[int, int, float | None], None] | None]:
    """Yield a callable (done, total, runs a second) that draws a bar, or None where nobody watches."""
    if quiet or not sys.stderr.isatty():
        yield None
        return
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn, TimeRemainingColumn

    columns = (
        BarColumn(), MofNCompleteColumn(), TextColumn("{task.fields[rate]}", markup=False),
        TimeRemainingColumn(), TextColumn("left"),
    )  # fmt: skip
    with Progress(*columns, console=Console(stderr=True), transient=True) as bar:
        task = bar.add_task("runs", total=None, rate="")

        def show(done: int, total: int, rate: float | None) -> None:
            bar.update(task, completed=done, total=total, rate=f"{rate:.3g} runs a second" if rate else "")

        yield show


def run(arguments: Sequence[str]) -> int:
    """Carry out one command line and return its exit status; whatever goes wrong is one sentence on stderr.

    Argument: arguments, without the program's name; none at all asks for help.
    """
    command = typer.main.get_command(app)
    try:
        status = command.main(list(arguments) or ["--help"], prog_name="finback", standalone_mode=False)
        sys.stdout.flush()
    except FinbackError as error:
        return _complain(str(error), error.exit_status)
    except (KeyboardInterrupt, typer.Abort):
        status = INTERRUPTED
    except USAGE_ERROR as error:
        return _complain(_usage_sentence(error), InputError.exit_status)
    except (BrokenPipeError, SystemExit):  # whoever read the output has seen enough; typer exits for that
        _drop_output()
        return 0
    except OSError as error:
        _drop_output()
        return _complain(f"{error.filename or 'standard output'}: {error.strerror or error}.", 1)
    except Exception as error:  # noqa: BLE001  # the last net: a user must never meet a traceback
        return _complain(
            f"stopped at an unexpected {type(error).__name__} ({_one_line(error)}); this is a defect of "
            "Finback, please report it with the command and the input files.",
            1,
        )
    if status == INTERRUPTED:  # newer typer returns it, an older one raises Abort
        return _complain("interrupted before the result was complete.", INTERRUPTED)
    return int(status or 0)


def main() -> None:
    """Run the command line of this process and exit with its status."""
    if not sys.warnoptions:
        warnings.simplefilter("ignore")  # what an engineer must know is a finding, not a library's warning
    for name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS"):
        os.environ.setdefault(name, "1")  # matrices are small here, and threads that share them out only wait
    for stream in (sys.stdout, sys.stderr):
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(errors="replace")  # a console without "²" must not end the run
    sys.exit(run(sys.argv[1:]))


def _usage_sentence(error: Any) -> str:
    message = _one_line(error.format_message()).rstrip(".")
    context = getattr(error, "ctx", None)
    path = context.command_path if context else "finback"
    return f"{message}; see {path} --help."


def _drop_output() -> None:
    """Send what standard output still holds nowhere, or the interpreter complains of it once more at exit."""
    os.dup2(os.open(os.devnull, os.O_WRONLY), 1)


def _one_line(text: object) -> str:
    return " ".join(str(text).split())


def _complain(sentence: str, status: int) -> int:
    print(f"finback: {plain(sentence, LONGEST)}", file=sys.stderr)  # paths may hold what a terminal obeys
    return status
