"""The digest of a campaign: drift by scipy's rank test, departures, sensors, and what comes first."""

from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pytest
from campaigns import RIG
from scipy import stats

from finback import rig
from finback.campaign_digest import Digest
from finback.ledger import Entry

DESCRIBED = rig.read_bytes(RIG.encode(), Path("rig.toml"))
SOURCE = SimpleNamespace(
    rig=DESCRIBED, label="a.csv", extra=("speed [m/s]", "note"), table=SimpleNamespace(decimal_comma=False)
)


def entry(
    number: int, k: float | None, *, findings: tuple = (), residual: float = 0.0, speed: str = "2"
) -> Entry:
    quantities = {"k": [k, None if k is None else 4.0, None, None]}
    result = {
        "status": "caution" if findings else "ok",
        "quantities": quantities,
        "best": ["convective tip", 1.0],
        "findings": [[code, severity, None, code] for code, severity in findings],
        "residuals": {"T1": [0.1 * residual, residual], "T2": [0.0, 0.0]},
        "aside": ["T1"] if abs(residual) > 2 else [],
        "sampled": False,
    }
    return Entry(number, f"run {number}", 0, number, (speed, "x"), b"", result, None)


def failed(number: int, reason: str) -> Entry:
    return Entry(
        number, f"run {number}", 0, number, ("", ""), b"", {"status": "failed", "reason": reason}, None
    )


def digest(*entries: Entry) -> Digest:
    return Digest([SOURCE]).add_all(entries)


@pytest.mark.parametrize("slope", [0.0, 0.05, -0.3])
def test_the_rank_correlation_is_scipys(slope: float) -> None:
    random = np.random.default_rng(4)
    values = np.round(170 + slope * np.arange(80) + random.normal(0, 4, 80), 1)  # with ties
    found = digest(*(entry(i, float(v)) for i, v in enumerate(values))).drift("k")
    expected = stats.spearmanr(np.arange(80), values)
    assert found.rank_correlation == pytest.approx(expected.statistic, abs=1e-12)
    assert found.p_value == pytest.approx(2 * stats.norm.sf(abs(expected.statistic) * np.sqrt(79)), rel=1e-9)
    assert found.p_value == pytest.approx(expected.pvalue, abs=0.01)  # Student's t in place of a normal one
    assert (found.first, found.last) == (np.median(values[:8]), np.median(values[-8:]))


def test_a_drift_is_called_as_often_as_it_says_where_there_is_none() -> None:
    random = np.random.default_rng(8)
    called = [digest(*(entry(i, float(k)) for i, k in enumerate(random.normal(170, 4, 25)))).drift("k").found
              for _ in range(600)]  # fmt: skip
    assert sum(called) <= stats.binom.ppf(0.9999, 600, 0.01)


def test_too_few_runs_or_one_value_tell_no_drift() -> None:
    assert digest(*(entry(i, 170.0 + i) for i in range(9))).drift("k") is None
    assert digest(*(entry(i, 170.0) for i in range(30))).drift("k") is None
    assert digest(*(entry(i, None) for i in range(30))).drift("k") is None


def test_a_departure_is_in_standard_deviations_of_the_run_and_of_all() -> None:
    values = [170.0 + (-1) ** i * 2.0 for i in range(20)] + [200.0]
    found = digest(*(entry(i, v) for i, v in enumerate(values))).departures()
    assert found[-1] == pytest.approx(
        (200 - 172) / np.hypot(4.0, 1.4826 * 4.0)
    )  # median 172, half of them 4 away


def test_what_asks_for_a_look_comes_first() -> None:
    steady = [entry(i, 170.0 + i % 3) for i in range(20)]
    found = digest(
        *steady,
        entry(20, 300.0),
        entry(21, 170.0, findings=(("misfit", "caution"),)),
        entry(22, 170.0, findings=(("misfit", "caution"), ("thick-fin", "caution"))),
        entry(23, 170.0, findings=(("heat-balance", "fault"),)),
        entry(24, 171.0, findings=(("assumed", "note"),)),
        failed(25, "no"),
    )
    assert [number for number, _ in found.concerns(10)] == [23, 22, 21, 20]
    assert [number for number, _ in found.concerns(2)] == [23, 22]
    assert found.concerning == 4


def test_reasons_are_counted_by_kind_and_cells_by_sensor() -> None:
    found = digest(
        failed(1, 'column T1: "a" is no number; write one'),
        failed(2, 'column T1: "b" is no number; write one'),
        failed(3, "something else"),
    )
    assert found.reasons == {'column T1: "…" is no number; write one': 2, "something else": 1}
    assert found.examples["something else"] == "run 3"
    assert found.sensors[DESCRIBED.title, "T1"].unreadable == 2


def test_residuals_add_up_by_sensor() -> None:
    record = digest(*(entry(i, 170.0, residual=r) for i, r in enumerate((3.0, 1.0, -1.0)))).sensors[
        DESCRIBED.title, "T1"
    ]
    assert (record.runs, record.ratios, record.squares, record.beyond) == (3, 3.0, 11.0, 1)
    assert (record.aside, record.accused) == (1, 0)
    assert record.residuals == pytest.approx(0.3)


def test_one_run_does_not_speak_for_all() -> None:
    entries = [*(entry(i, 170.0, residual=0.0) for i in range(9)), entry(9, 170.0, residual=800.0)]
    record = digest(*entries).sensors[DESCRIBED.title, "T1"]
    assert (record.ratios, record.beyond) == (5.0, 1)
    assert record.residuals == pytest.approx(0.5)  # as far as five of its uncertainties


def test_the_speed_is_found_and_texts_are_told_from_numbers() -> None:
    cells = ("2.5", "", "-1e1", "2")
    found = digest(*(entry(i, 170.0, speed=cell) for i, cell in enumerate(cells)))
    assert found.speed_column == "speed [m/s]"
    assert found.texts == {"note"}
    assert np.array_equal(found.speeds, [2.5, np.nan, -10.0, 2.0], equal_nan=True)
    assert digest(entry(1, 170.0, speed="1.2.3")).texts == {"note", "speed [m/s]"}
    assert digest(entry(1, 170.0, speed="nan")).texts == {"note", "speed [m/s]"}
