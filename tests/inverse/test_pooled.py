"""What runs share, estimated once for all of them: `finback batch --share`."""

import csv
import json
from dataclasses import replace
from pathlib import Path

import numpy as np
import pooled_study
import pytest
from pooled_study import RIG, ZERO, without_heat

from finback import arrow, cli, pooled, pooled_fit, pooled_model, pooled_runs, quick
from finback.arrow import State
from finback.errors import FinbackError
from finback.pooled_runs import Pool, Row
from finback.problem import Candidate
from finback.readings import Readings

SENSORS = ("T1", "T2", "T3", "T4", "TP", "TA", "Q")
JOINED = Candidate("convective", True, True)
NO_K = RIG.replace('conductivity = "167 W/(m K) +/- 5 %"\n', "")


def pool_of(rows: int = 8, text: str = RIG, number: int = 3) -> Pool:
    return pooled_study.campaign(number, rows, text)[0]


def written(folder: Path, pool: Pool, name: str = "runs", text: str = RIG) -> list[str]:
    """Write rig and runs as the command takes them."""
    (folder / "rig.toml").write_text(text, encoding="utf-8")
    with (folder / f"{name}.csv").open("w", encoding="utf-8", newline="") as file:
        table = csv.writer(file)
        table.writerow(["run", *SENSORS])
        for row in pool.rows:
            values = [row.readings.values.get(sensor) for sensor in SENSORS]
            shown = [
                None if v is None else v - ZERO * (s != "Q") for s, v in zip(SENSORS, values, strict=True)
            ]
            table.writerow([row.name, *("" if v is None else f"{v:.5f}" for v in shown)])
    return [str(folder / "rig.toml"), str(folder / f"{name}.csv")]


def isothermal(count: int, seed: int = 5) -> list[Row]:
    """Return rows read before heating, with what its thermometers are off."""
    rng = np.random.default_rng(seed)
    off = dict(zip(SENSORS, (0.06, 0.05, 0.09, 0.07, -0.15, 0.1, 0.0), strict=True))
    rows = []
    for number in range(count):
        level = ZERO + rng.uniform(18.0, 24.0)
        values = {name: level + off[name] + 0.15 * rng.standard_normal() for name in SENSORS}
        rows.append(Row(f"zero {number}", "calibration", Readings(f"zero {number}", {**values, "Q": 0.0})))
    return rows


def test_a_step_is_that_of_all_unknowns_at_once() -> None:
    model = pooled_model.pose(pool_of(3), JOINED)
    z, state = pooled_fit.start_of(model)
    s, sigma = pooled_fit.parts(model, z[None])
    model = model.linearised([w[0] for w in state.w], s[0], state.u[0])
    (group,), (w,), q = model.groups, state.w, model.n_physical
    found = arrow.solve(model, state, s, sigma, shared=True)
    means, sds = (np.array([getattr(p.prior, name) for p in model.shared]) for name in ("mean", "sd"))

    def residuals(x: np.ndarray) -> np.ndarray:  # of every row, every run and every unknown, by hand
        own, shared, u = x[:9].reshape(3, 3), x[9 : 9 + q], x[9 + q :]
        predicted = group.predict(own, np.tile(shared, (3, 1)), np.arange(3))
        away = np.hstack([own - w[0], np.tile(shared - s, (3, 1))])
        bent = np.einsum("rncm,rc,m->rn", group.bends, away, u)
        errors = group.errors @ u
        errors[:, : predicted.shape[1]] += bent
        off = group.targets - np.concatenate([predicted, own], axis=1) - errors
        return np.concatenate([(off * np.sqrt(group.weights)).ravel(), (shared - means) / sds, u])

    x = np.concatenate([w.ravel(), s[0], state.u[0]])
    nudges = 1e-5 * np.eye(len(x))
    slopes = np.array([residuals(x + e) - residuals(x - e) for e in nudges]).T / 2e-5
    curvature = slopes.T @ slopes
    move = -np.linalg.solve(curvature, slopes.T @ residuals(x))
    assert found.step[0] == pytest.approx(move[9:], rel=1e-4, abs=1e-6)
    covariance = np.linalg.inv(curvature)
    assert np.linalg.inv(found.border[0]) == pytest.approx(covariance[9:, 9:], rel=1e-4, abs=1e-9)
    assert found.spreads[0][1] + found.responses[0][0, 1] @ covariance[9:, 9:] @ found.responses[0][
        0, 1
    ].T == pytest.approx(covariance[3:6, 3:6], rel=1e-4, abs=1e-9)
    assert found.cost[0] == pytest.approx(0.5 * np.square(residuals(x)).sum())
    log_det = found.log_det_own[0] + np.linalg.slogdet(found.border[0])[1]
    assert log_det == pytest.approx(np.linalg.slogdet(curvature)[1], abs=1e-5)


def test_heat_in_a_few_runs_tells_k_and_h_in_all_of_them() -> None:
    pool, errors, h = pooled_study.campaign(11, 24, NO_K)
    pool = without_heat(pool, 3)
    for row in (pool.rows[5], pool.rows[20]):  # alone, neither k nor h nor the joint can be told
        alone = quick.estimate(pool.rig, row.readings, 1).found
        assert all(alone[name].median is None for name in ("k", "h", "joint"))
    found = pooled.estimate(pool, 1)
    truths = {"k": errors.k, "joint": errors.joint}
    for name, truth in truths.items():
        told = found.shared[name]
        assert told.determined_by == "readings"
        assert abs(told.mean - truth) < 3 * told.sd
    assert found.shared["k"].sd < 0.05 * errors.k
    assert found.shared["joint"].sd < 0.15 * errors.joint
    assert np.abs((found.runs.h_median - h) / found.runs.h_sd).max() < 4
    assert found.runs.h_sd.max() < 0.06 * h.max()


def test_runs_that_leave_k_open_do_so_however_many_there_are() -> None:
    found = pooled.estimate(without_heat(pool_of(40, NO_K), 0), 1)
    assert found.shared["k"].median is None
    assert found.shared["joint"].median is None
    assert found.shared["joint_times_k"].determined_by == "readings"
    assert np.isnan(found.runs.h_median).all()
    assert {f.code for f in found.findings if f.severity == "caution"} == {"not-determined"}


def test_rows_before_heating_take_the_calibration_error_off() -> None:
    pool = pool_of(12)
    plain = pooled.estimate(pool, 1)
    found = pooled.estimate(replace(pool, rows=(*pool.rows, *isothermal(30))), 1)
    by_name = {each.name: each for each in found.offsets}
    apart = by_name["TP"].mean - by_name["TA"].mean  # their difference is what such rows tell
    assert apart == pytest.approx(-0.25, abs=0.12)
    before = {each.name: each.sd for each in plain.offsets}
    assert all(by_name[name].sd < 0.85 * before[name] for name in ("TP", "TA", "T1"))
    assert found.runs.uses.count("calibration") == 30
    assert np.isnan(found.runs.h_median[-30:]).all()


def test_a_run_that_disagrees_is_left_out_and_named() -> None:
    pool = pool_of(12)
    wrong = pool.rows[7]
    values = {**wrong.readings.values, "T2": wrong.readings.values["T2"] + 6.0}
    rows = [*pool.rows]
    rows[7] = replace(wrong, readings=Readings(wrong.name, values))
    found = pooled.estimate(replace(pool, rows=tuple(rows)), 1)
    assert found.runs.uses.count("left out") == 1
    assert found.runs.uses[7] == "left out"
    assert any(f.code == "misfit" and wrong.name in f.message for f in found.findings)
    clean = pooled.estimate(pool, 1)
    for name in ("k", "joint"):
        moved = found.shared[name].mean - clean.shared[name].mean
        assert abs(moved) < clean.shared[name].sd


def test_runs_with_other_sensors_and_an_unstated_noise_count_as_well() -> None:
    pool, errors, _ = pooled_study.campaign(4, 24, RIG.replace('noise = "0.15 K"\n', ""))
    rows = []
    for i, row in enumerate(pool.rows):
        gone = ("TP",) if i % 3 == 0 else ("T2", "Q") if i % 3 == 1 else ()
        values = {n: v for n, v in row.readings.values.items() if n not in gone}
        rows.append(replace(row, readings=Readings(row.name, values)))
    found = pooled.estimate(replace(pool, rows=tuple(rows)), 1)
    assert found.noise is not None
    assert abs(found.noise.mean - 0.15) < 4 * found.noise.sd
    for name, truth in {"k": errors.k, "joint": errors.joint}.items():
        assert abs(found.shared[name].mean - truth) < 3.5 * found.shared[name].sd
    assert np.isfinite(found.runs.h_median).all()


def test_nothing_is_drawn_where_nothing_physical_is_shared_by_the_candidate() -> None:
    pool = replace(pool_of(6), share=("joint",))
    found = pooled.estimate(pool, 1)
    assert set(found.shared) == {"joint"}
    model = pooled_model.pose(pool, Candidate("convective", False, True))
    fitted = pooled_fit.fit(model)
    assert fitted.mode is None
    assert np.isfinite(fitted.log_evidence)


def test_the_command_writes_what_readme_promises(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    pool = pool_of(6)
    pool = replace(pool, rows=(*pool.rows, *isothermal(2)))
    out = tmp_path / "out"
    command = ["batch", *written(tmp_path, pool), "--out", str(out), "--workers", "1"]
    assert cli.run([*command, "--share", "joint, k"]) == 0
    assert "Shared by all runs (6 runs, 2 isothermal, 0 left out)" in capsys.readouterr().out
    told = json.loads((out / "pooled.json").read_text(encoding="utf-8"))
    assert list(told["shared"]) == ["k", "joint", "joint_times_k"]
    assert set(told["shared"]["k"]) == {"unit", "median", "mean", "sd", "low95", "high95", "determined_by"}
    assert (told["runs"], told["calibration_runs"], told["left_out"]) == (6, ["zero 0", "zero 1"], [])
    assert {each["sensor"] for each in told["offsets"]} == set(SENSORS)
    assert {each["sensor"] for each in told["holes"]} == {"T1", "T2", "T3", "T4"}
    with (out / "pooled_runs.csv").open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    with (out / "results.csv").open(encoding="utf-8", newline="") as file:
        results = list(csv.DictReader(file))
    assert [row["run"] for row in rows] == [row["run"] for row in results]
    assert [row["use"] for row in rows] == ["run"] * 6 + ["calibration"] * 2
    keys = (Path(__file__).parents[2] / "README.md").read_text(encoding="utf-8")
    assert not [key for key in (*told, *rows[0]) if f"`{key}`" not in keys]


def test_the_order_of_tables_makes_no_difference(tmp_path: Path) -> None:
    pool = pool_of(6)
    rig, one = written(tmp_path, replace(pool, rows=pool.rows[:2]), "one")
    _, two = written(tmp_path, replace(pool, rows=pool.rows[:1:-1]), "two")
    _, whole = written(tmp_path, pool, "whole")
    found = []
    for tables in ([one, two], [two, one], [whole]):
        sources = cli_sources([rig, *tables])
        gathered = pooled_runs.gather(sources, ("k", "joint"))
        assert [row.name for row in gathered.rows] == [f"run {n}" for n in range(1, 7)]
        found.append(pooled.estimate(gathered, 1).shared)
    assert found[0] == found[1] == found[2]


def cli_sources(paths: list[str]) -> tuple:
    from finback import campaign

    return campaign.read([Path(path) for path in paths])


@pytest.mark.parametrize(
    ("share", "text", "words"),
    [
        ("joints,k", RIG, '"joints" cannot be shared; the nearest is "joint"'),
        ("h", RIG, "h is each run's own"),
        ("k,k", RIG, '"k" stands twice'),
        ("", RIG, '"" cannot be shared'),
        ("k", RIG.replace(" +/- 5 %", ""), "--share k: the rig states it exactly"),
        ("joint", RIG.replace('TP = { on = "plate" }\n', ""), "no sensor reads the plate"),
        ("emissivity", RIG, "no unknown of this rig"),
    ],
)
def test_a_wrong_name_is_refused_before_anything_is_done(
    share: str, text: str, words: str, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    paths = written(tmp_path, pool_of(2), text=text)
    if "TP" not in text:
        table = tmp_path / "runs.csv"
        table.write_text(table.read_text().replace("TP", "note"), encoding="utf-8")
    status = cli.run(["batch", *paths, "--out", str(tmp_path / "out"), "--share", share])
    told = capsys.readouterr().err
    assert (status, told.count("\n")) == (2, 1)
    assert words in told
    assert not (tmp_path / "out").exists()


def test_one_run_shares_nothing(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    pool = pool_of(1)
    pool = replace(pool, rows=(*pool.rows, *isothermal(1)))
    command = ["batch", *written(tmp_path, pool), "--out", str(tmp_path / "out"), "--share", "k"]
    assert cli.run(command) == 2
    assert "only one run of 2 can be used" in capsys.readouterr().err
    assert not (tmp_path / "out").exists()


def test_several_rigs_share_nothing(tmp_path: Path) -> None:
    one, two = tmp_path / "one", tmp_path / "two"
    for folder in (one, two):
        folder.mkdir()
    paths = [
        *written(one, pool_of(2), "a"),
        *written(two, pool_of(2), "b", RIG.replace("8 mm", "9 mm")),
    ]
    with pytest.raises(FinbackError, match="several rigs"):
        pooled_runs.parse("k", [source.rig for source in cli_sources(paths)])


@pytest.mark.parametrize(
    ("changes", "expected"),
    [
        ({}, True),
        ({"Q": 0.5}, False),
        ({"T1": ZERO + 20.8}, True),  # by what calibration makes of it, the heat being zero
        ({"T1": ZERO + 22.0}, False),
        ({"Q": None, "T1": ZERO + 20.3}, True),
        ({"Q": None, "T1": ZERO + 20.8}, False),  # a fin that is a little warm, for all that is known
        ({"TA": None}, False),
    ],
)
def test_a_row_of_one_temperature_is_known(changes: dict[str, float | None], expected: bool) -> None:
    rig = pooled_study.described(RIG.replace('calibration = "0.1 K"', 'calibration = "0.2 K"'))
    values = {**dict.fromkeys(SENSORS, ZERO + 20.0), "Q": 0.0, **changes}
    values = {name: value for name, value in values.items() if value is not None}
    assert pooled_runs.is_isothermal(rig, values) is expected


def test_states_keep_apart_what_is_chosen() -> None:
    state = State([np.arange(12.0).reshape(3, 2, 2)], np.arange(6.0).reshape(3, 2))
    other = State([np.zeros((1, 2, 2))], np.zeros((1, 2)))
    changed = state.with_draws(np.array([1]), other)
    assert changed.w[0][1].sum() == changed.u[1].sum() == 0
    assert state.w[0][1].sum() == 22
