"""`finback batch`: one table of many runs, the same bytes however it came about, whatever is in the rows."""

import csv
import io
import os
import subprocess
import sys
from collections.abc import Sequence
from pathlib import Path

import campaigns
import openpyxl
import pytest
from campaigns import KILLER, SENSORS, Doomed, Here, compute, deadly, dying_once, pretend, rows, text, write

import finback
from finback import campaign, campaign_block, campaign_table, cli
from finback.campaign_block import Answer, Block
from finback.errors import ComputationError, InputError, StoppedError
from finback.ledger import Ledger

RUNS = 12


@pytest.fixture(scope="module")
def clean(tmp_path_factory: pytest.TempPathFactory) -> bytes:
    """The results of an undisturbed campaign."""
    folder = tmp_path_factory.mktemp("clean")
    return compute(write(folder, readings=text(rows(RUNS))), folder / "out")


def table(content: bytes) -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO(content.decode(), newline="")))


def test_a_row_says_what_a_fit_says(clean: bytes, tmp_path: Path) -> None:
    paths = write(tmp_path, readings=text(rows(RUNS)))
    fitted = finback.fit(paths[0], paths[1], run="run 3")
    row = table(clean)[2]
    assert (row["run"], row["status"]) == ("run 3", fitted.status)
    assert row["best_candidate"] == fitted.candidates[0].name
    assert row["speed [m/s]"] == rows(RUNS)[2][-1]
    for name, summary in {**fitted.parameters, **fitted.derived}.items():
        for figure in ("median", "low95", "high95"):
            value = getattr(summary, figure)
            if value is None:
                assert row[f"{name}_{figure}"] == ""
            else:  # two samplers of one posterior
                assert float(row[f"{name}_{figure}"]) == pytest.approx(value, abs=0.12 * summary.sd + 1e-12)


@pytest.mark.parametrize("block", [1, 5, 100])
def test_the_size_of_a_block_makes_no_difference(clean: bytes, tmp_path: Path, block: int) -> None:
    assert compute(write(tmp_path, readings=text(rows(RUNS))), tmp_path / "out", block=block) == clean


def test_the_order_of_rows_and_tables_makes_no_difference(clean: bytes, tmp_path: Path) -> None:
    one, two = text(rows(RUNS)[7:][::-1]), text(rows(RUNS)[:7])
    described, *tables = write(tmp_path, zebra=one, ant=two)
    assert compute([described, *tables], tmp_path / "out") == clean
    assert compute([described, *tables[::-1]], tmp_path / "other") == clean


def test_what_was_cut_off_goes_on_where_it_was(clean: bytes, tmp_path: Path) -> None:
    paths, out = write(tmp_path, readings=text(rows(RUNS))), tmp_path / "out"
    with pytest.raises(StoppedError, match="2 of 12 runs are done and kept; the same command goes on"):
        compute(paths, out, _Interrupted(after=2), block=2)
    pool = Here()
    assert compute(paths, out, pool) == clean
    assert pool.computed == RUNS - 2  # one block was put in, the next was computed and not put in yet


class _Interrupted(Here):
    """Someone presses Ctrl-C after so many blocks."""

    def __init__(self, after: int) -> None:
        super().__init__()
        self.left = after

    def submit(self, *arguments: object) -> object:
        if not self.left:
            raise KeyboardInterrupt
        self.left -= 1
        return super().submit(*arguments)


def test_only_what_is_new_is_computed(clean: bytes, tmp_path: Path) -> None:
    out = tmp_path / "out"
    compute(write(tmp_path, readings=text(rows(RUNS)[:8])), out)
    pool = Here()
    assert compute(write(tmp_path, readings=text(rows(RUNS))), out, pool) == clean
    assert pool.computed == 4


def test_processes_and_the_command_give_the_same_bytes(clean: bytes, tmp_path: Path) -> None:
    described, readings = write(tmp_path, readings=text(rows(RUNS)))
    out = tmp_path / "out"
    assert (
        cli.run(["batch", str(described), str(readings), "--out", str(out), "--workers", "2", "--quiet"]) == 0
    )
    assert (out / "results.csv").read_bytes() == clean


POISON = {
    1: (1, "broken"),
    4: (2, "-300"),
    6: (5, "99999"),
    9: (1, "1e999"),
}
"""Cells that cannot be: by row, the column and what stands in it."""
REASONS = (
    'column T1: "broken" is no number; write a number or leave it empty',
    'column T2: "-300" degC is below absolute zero; correct the value, or its unit in the header',
    'column TA: "99999" degC is hotter than any fin (3000 degC); correct the value, or its unit in the '
    "header",
    'column T1: "1e999" is too large; write a number or leave it empty',
)


def poisoned(body: Sequence[Sequence[str]]) -> list[list[str]]:
    found = [list(row) for row in body]
    for number, (column, cell) in POISON.items():
        found[number][column] = cell
    return found


def test_poisoned_rows_fail_with_a_reason_and_leave_the_others_alone(clean: bytes, tmp_path: Path) -> None:
    body = poisoned(rows(RUNS))
    body[11][1:7] = ["", "", "", "", "21.0", "3.0"]
    content = compute(write(tmp_path, readings=text(body)), tmp_path / "out")
    lines, expected = content.splitlines(), clean.splitlines()
    bad = {*POISON, 11}
    assert [lines[0], *(lines[1 + i] for i in range(RUNS) if i not in bad)] == [
        expected[0],
        *(expected[1 + i] for i in range(RUNS) if i not in bad),
    ]
    found = table(content)
    assert tuple(found[i]["message"] for i in POISON) == REASONS
    assert "has no temperature along the fin" in found[11]["message"]
    assert {found[i]["status"] for i in bad} == {"failed"}
    assert {found[i]["h_median"] for i in bad} == {""}
    assert found[1]["speed [m/s]"] == rows(RUNS)[1][-1]


def test_rows_without_a_name_or_with_cells_too_many_fail_alone(clean: bytes, tmp_path: Path) -> None:
    body = [*rows(RUNS), ("", *rows(13)[-1][1:]), ("x" * 121, *rows(14)[-1][1:]), (*rows(15)[-1], "7", "8")]
    found = table(compute(write(tmp_path, readings=text(body)), tmp_path / "out"))
    failed = {row["run"]: row["message"] for row in found if row["status"] == "failed"}
    assert failed == {
        "(no name)": "this run has no proper name; write one of 1 to 120 printable characters",
        "x" * 40: "this run has no proper name; write one of 1 to 120 printable characters",
        "run 15": "its row has more cells than the header; write one cell a column",
    }
    good = [row for row in found if row["status"] != "failed"]
    assert good == table(clean)


def test_a_table_as_people_have_it(tmp_path: Path) -> None:
    """Names with commas and quotes, dates, a row of units, decimal commas and 200 columns of their own."""
    own = [f"channel {number}" for number in range(200)]
    header = ["run", "date", *SENSORS, *own]
    units = ["", "", *["degC"] * 5, "W", *["V"] * 200]
    body = [
        [
            f'fan "{number}", cold',
            "2026-03-0" + str(number + 1),
            *(c.replace(".", ",") for c in row[1:7]),
            *["1,5"] * 200,
        ]
        for number, row in enumerate(rows(3))
    ]
    stream = io.StringIO()
    csv.writer(stream, delimiter=";").writerows([header, units, *body])
    found = table(compute(write(tmp_path, readings=stream.getvalue()), tmp_path / "out"))
    assert [row["run"] for row in found] == ['fan "0", cold', 'fan "1", cold', 'fan "2", cold']
    assert found[2]["date"] == "2026-03-03"
    assert {row["channel 199"] for row in found} == {"1,5"}
    assert all(float(row["h_median"]) > 0 for row in found)


def test_a_workbook_gives_the_same(clean: bytes, tmp_path: Path) -> None:
    (described,) = write(tmp_path)
    book = openpyxl.Workbook()
    sheet = book.active
    sheet.append(["run", *SENSORS, "speed [m/s]"])
    for row in rows(RUNS):
        sheet.append([row[0], *map(float, row[1:7]), row[7]])
    book.save(tmp_path / "readings.xlsx")
    found = table(compute([described, tmp_path / "readings.xlsx"], tmp_path / "out"))
    assert [row["run"] for row in found] == [row["run"] for row in table(clean)]
    assert [row["h_median"] for row in found] == [row["h_median"] for row in table(clean)]


def test_a_workbook_of_formulas_without_values_is_refused(tmp_path: Path) -> None:
    (described,) = write(tmp_path)
    book = openpyxl.Workbook()
    sheet = book.active
    sheet.append(["run", *SENSORS])
    sheet.append(["a", "=1+60", 50, 45, 40, 21, 3.0])
    book.save(tmp_path / "readings.xlsx")
    with pytest.raises(InputError, match=r'the formula "=1\+60" has no stored value'):
        campaign.read([described, tmp_path / "readings.xlsx"])


def test_several_rigs_in_one_table(tmp_path: Path) -> None:
    described, first = write(tmp_path, first=text(rows(2)))
    other = tmp_path / "other.toml"
    other.write_text(campaigns.RIG.replace("four holes", "four other holes"), encoding="utf-8")
    second = tmp_path / "second.csv"
    second.write_text(text(rows(2)), encoding="utf-8")
    content = compute([described, first, other, second], tmp_path / "out")
    assert [(row["run"], row["rig"]) for row in table(content)] == [
        ("first.csv: run 1", "An invented pin with four holes"),
        ("first.csv: run 2", "An invented pin with four holes"),
        ("second.csv: run 1", "An invented pin with four other holes"),
        ("second.csv: run 2", "An invented pin with four other holes"),
    ]
    assert compute([other, second, described, first], tmp_path / "swapped") == content


def test_the_parquet_file_holds_the_same_numbers(clean: bytes, tmp_path: Path) -> None:
    from pyarrow import parquet

    compute(write(tmp_path, readings=text(rows(RUNS))), tmp_path / "out")
    found = parquet.read_table(tmp_path / "out" / "results.parquet")
    expected = table(clean)
    assert found.column_names == list(expected[0])
    assert found.column("h_median").to_pylist() == [float(row["h_median"]) for row in expected]
    assert found.column("speed [m/s]").to_pylist() == [float(row["speed [m/s]"]) for row in expected]
    assert found.schema.field("h_median").metadata == {b"unit": b"W/(m^2 K)"}


def test_posteriors_are_kept_where_they_are_wanted(tmp_path: Path) -> None:
    paths, out = write(tmp_path, readings=text(rows(2))), tmp_path / "out"
    compute(paths, out)
    assert not (out / "posteriors").exists()
    pool = Here()
    compute(paths, out, pool, keep_posteriors=True)
    assert pool.computed == 2  # their results were there, their draws were not
    import xarray

    files = sorted((out / "posteriors").iterdir())
    assert [path.name[:6] for path in files] == ["run-1-", "run-2-"]
    with xarray.open_dataset(files[0], group="posterior", engine="h5netcdf") as draws:
        median = float(draws["h"].median())
        assert draws.attrs["run"] == "run 1"
    assert median == pytest.approx(float(table((out / "results.csv").read_bytes())[0]["h_median"]), rel=1e-7)


@pytest.mark.parametrize(
    ("given", "sentence"),
    [
        (["readings.csv"], "readings.csv: readings stand before any rig file"),
        (["rig.toml"], "rig.toml: no readings follow this rig"),
        (["rig.toml", "rig.toml", "readings.csv"], "rig.toml: no readings follow this rig"),
        (["rig.toml", "readings.csv", "readings.csv"], "readings.csv: this table is given twice"),
        (["rig.toml", "gone.csv"], "gone.csv: there is no such file"),
    ],
)
def test_a_wrong_command_line_is_a_sentence(
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
    capsys: pytest.CaptureFixture[str],
    given: list[str],
    sentence: str,
) -> None:
    write(tmp_path, readings=text(rows(1)))
    monkeypatch.chdir(tmp_path)
    assert cli.run(["batch", *given, "--out", "out"]) == 2
    assert sentence in capsys.readouterr().err


def test_a_table_that_vanishes_is_a_sentence_and_its_return_goes_on(clean: bytes, tmp_path: Path) -> None:
    paths, out = write(tmp_path, readings=text(rows(RUNS))), tmp_path / "out"
    sources = campaign.read(paths)
    paths[1].rename(tmp_path / "away.csv")
    out.mkdir()
    with pytest.raises(InputError, match=r"readings\.csv: there is no such file"):
        campaign.run(sources, out, pool=Here())
    (tmp_path / "away.csv").rename(paths[1])
    assert compute(paths, out) == clean


def test_a_table_that_vanishes_under_way_is_not_missed(clean: bytes, tmp_path: Path) -> None:
    paths, out = write(tmp_path, readings=text(rows(RUNS))), tmp_path / "out"

    def remove(block: Block) -> Answer:
        paths[1].unlink(missing_ok=True)
        return campaign_block.compute(block)

    assert compute(paths, out, Here(remove), block=3) == clean


def test_tables_that_cannot_be_written_leave_the_ledger(clean: bytes, tmp_path: Path) -> None:
    paths, out = write(tmp_path, readings=text(rows(RUNS))), tmp_path / "out"
    (out / "results.csv").mkdir(parents=True)
    with pytest.raises(ComputationError, match="the tables cannot be written"):
        compute(paths, out)
    assert sorted(each.name for each in out.iterdir()) == ["ledger.sqlite", "results.csv"]
    (out / "results.csv").rmdir()
    pool = Here()
    assert compute(paths, out, pool) == clean
    assert pool.computed == 0


def test_the_folder_of_another_campaign_is_left_alone(tmp_path: Path) -> None:
    paths, out = write(tmp_path, readings=text(rows(2))), tmp_path / "out"
    before = compute(paths, out)
    with pytest.raises(InputError, match="this folder holds a campaign of another rig, or of another seed"):
        compute(paths, out, seed=2)
    assert (out / "results.csv").read_bytes() == before
    (out / "ledger.sqlite").unlink()
    with pytest.raises(InputError, match=r"already holds results\.csv, and no ledger that it is from"):
        campaign_table.prepare(out)


@pytest.mark.slow
def test_a_worker_that_dies_is_replaced(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("FINBACK_TEST_MARKER", str(tmp_path / "marker"))
    pool = Doomed(2, dying_once)
    try:
        found = table(compute(write(tmp_path, readings=text(rows(RUNS))), tmp_path / "out", pool, block=2))
    finally:
        pool.close()
    assert [row["status"] for row in found] == ["ok"] * RUNS


def test_a_run_that_kills_workers_fails_alone_and_is_tried_again_another_time(tmp_path: Path) -> None:
    body = [list(row) for row in rows(5)]
    body[2][0] = KILLER
    paths, out = write(tmp_path, readings=text(body)), tmp_path / "out"
    pool = Doomed(1, deadly)
    try:
        found = table(compute(paths, out, pool, block=2))
    finally:
        pool.close()
    failed = {row["run"]: row["message"] for row in found if row["status"] == "failed"}
    assert failed == {KILLER: "the worker that computed it died, twice: of too little memory, or killed"}
    again = Here(pretend)
    compute(paths, out, again)
    assert again.computed == 1


def test_a_cut_off_process_loses_nothing_that_it_acknowledged(clean: bytes, tmp_path: Path) -> None:
    """The slow suite kills fifty times, at random."""
    described, readings = write(tmp_path, readings=text(rows(RUNS)))
    out = tmp_path / "out"
    script = (
        "import os, sys\n"
        "from pathlib import Path\n"
        "sys.path[:0] = sys.argv[1].split(os.pathsep)\n"
        "import campaigns\n"
        "class Killed(campaigns.Here):\n"
        "    left = 3\n"
        "    def submit(self, function, block):\n"
        "        if not self.left: os.kill(os.getpid(), 9)\n"
        "        self.left -= 1\n"
        "        return super().submit(function, block)\n"
        "campaigns.compute([Path(p) for p in sys.argv[2:4]], Path(sys.argv[4]), Killed(), block=2)\n"
    )
    here = str(Path(__file__).parent)
    command = [sys.executable, "-c", script, here, str(described), str(readings), str(out)]
    assert subprocess.run(command, check=False, env={**os.environ}).returncode == -9
    with Ledger(out / "ledger.sqlite") as ledger:
        total, done = ledger.counts()
    assert (total, done) == (RUNS, 4)  # of three blocks the last was computed and not yet put in
    pool = Here()
    assert compute([described, readings], out, pool) == clean
    assert pool.computed == RUNS - done
