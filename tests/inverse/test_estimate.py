"""An estimate as a dictionary, as text, in a notebook and as netCDF."""

import json
import re
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
import xarray
from fits import DATASETS, dataset
from rigs import exact_readings, pin_rig

import finback
from finback.estimate import Estimate, Summary
from finback.findings import CODES
from finback.quantity import Quantity

# the contract that other programs read: keys in their order
TOP = (
    "finback",
    "rig",
    "run",
    "status",
    "parameters",
    "derived",
    "candidates",
    "fit",
    "sampler",
    "budget",
    "findings",
)
NUMBERS = ("median", "mean", "sd", "low95", "high95", "least_squares", "standard_error")
SUMMARY = ("unit", *NUMBERS, "determined_by")
CANDIDATE = ("name", "probability", "log_evidence", "log_evidence_error", "loo", "aicc", "bic")
FIT = ("residuals", "chi_square", "degrees_of_freedom", "p_value")
SAMPLER = ("method", "draws", "ess_min", "rhat_max", "seed", "converged")
LINE = ("source", "kind", "share_of_variance")
EXPANDED = ("unit", "value", "expanded", "linear")
FINDING = ("code", "severity", "sensor", "message")


@pytest.fixture(scope="module")
def bench() -> Estimate:
    return dataset("bench-pin")


@pytest.fixture(scope="module")
def bare() -> Estimate:
    """A fit of which the half is not determined."""
    rig = pin_rig(places=("air",), tip="convective")
    return finback.fit(rig, exact_readings(rig), seed=1)


def numbers(value: object) -> list[float]:
    """Every number in nested lists and dictionaries."""
    if isinstance(value, dict):
        return [n for each in value.values() for n in numbers(each)]
    if isinstance(value, list):
        return [n for each in value for n in numbers(each)]
    return [value] if isinstance(value, float) else []


@pytest.mark.parametrize("name", ["bench", "bare"])
def test_the_dictionary_keeps_the_contract(name: str, request: pytest.FixtureRequest) -> None:
    estimate: Estimate = request.getfixturevalue(name)
    found = estimate.to_dict()
    assert tuple(found)[: len(TOP)] == TOP
    assert found["finback"] == finback.__version__
    assert found["status"] in ("ok", "caution", "failed")
    for summary in [*found["parameters"].values(), *found["derived"].values()]:
        assert tuple(summary) == SUMMARY
        assert summary["determined_by"] in ("readings", "prior", "both")
    assert {"h", "k", "joint", "air"} <= set(found["parameters"])
    assert {"h_over_k", "m", "base_temperature", "heat", "efficiency"} <= set(found["derived"])
    for candidate in found["candidates"]:
        assert tuple(candidate) == CANDIDATE
    assert found["budget"]
    for line in found["budget"]:
        assert tuple(line) == LINE
        assert line["kind"] in ("random", "systematic", "prior")
    for expanded in found["expanded"].values():
        assert tuple(expanded) == EXPANDED
    probabilities = [candidate["probability"] for candidate in found["candidates"]]
    assert probabilities == sorted(probabilities, reverse=True)
    assert sum(probabilities) == pytest.approx(1.0, abs=1e-9)
    assert tuple(found["fit"])[: len(FIT)] == FIT
    assert set(found["fit"]["residuals"]) == set(estimate.readings.values)
    assert tuple(found["sampler"]) == SAMPLER
    for finding in found["findings"]:
        assert tuple(finding) == FINDING
        assert finding["code"] in CODES
        assert finding["severity"] in ("note", "caution", "fault")
    json.loads(json.dumps(found, allow_nan=False))
    assert np.isfinite(numbers(found)).all()


@pytest.mark.parametrize("name", ["bench", "bare"])
def test_every_null_has_a_finding_that_says_why(name: str, request: pytest.FixtureRequest) -> None:
    estimate: Estimate = request.getfixturevalue(name)
    said = " ".join(f.message.lower() for f in estimate.findings if f.code == "not-determined")
    explained = {f.evidence["quantity"] for f in estimate.findings if f.code == "not-determined"}
    together = {"joint_times_k": "joint", "base_heat_flux": "heat"}
    everything = {**estimate.parameters, **estimate.derived}
    for quantity, summary in everything.items():
        if summary.median is None:
            assert quantity in explained or together[quantity] in explained, quantity
            assert all(getattr(summary, n) is None for n in NUMBERS if n not in ("low95", "high95"))
        else:
            assert quantity not in explained
            assert summary.low95 <= summary.median <= summary.high95
    assert ("h/k" in said) == (name == "bare")


def test_the_same_seed_gives_the_same_bytes_and_another_nearly_the_same_numbers() -> None:
    folder = DATASETS / "aluminium-rod"
    first, other = dataset("aluminium-rod", 1), dataset("aluminium-rod", 4)
    again = finback.fit(str(folder / "rig.toml"), str(folder / "readings.csv"), seed=1)
    assert json.dumps(first.to_dict()) == json.dumps(again.to_dict())
    np.testing.assert_array_equal(first.draws.values, again.draws.values)
    h, k = first.parameters["h"], other.parameters["h"]
    assert h.median != k.median
    assert h.median == pytest.approx(k.median, abs=0.1 * h.sd)
    assert h.sd == pytest.approx(k.sd, rel=0.1)
    assert h.least_squares == k.least_squares


def test_a_number_that_is_none_is_refused(bench: Estimate) -> None:
    broken = replace(bench.parameters["h"], mean=float("nan"))
    with pytest.raises(ValueError, match="no result"):
        replace(bench, parameters={"h": broken}).to_dict()


LONG = "Pin 7 of a cooler that has so long a name that no terminal shows it in one line, on the second bench"


@pytest.mark.parametrize("name", ["bench", "bare"])
def test_text_fits_eighty_columns(name: str, request: pytest.FixtureRequest) -> None:
    estimate: Estimate = request.getfixturevalue(name)
    for each in (estimate, replace(estimate, rig=replace(estimate.rig, title=LONG))):
        lines = str(each).splitlines()
        assert max(map(len, lines)) <= 80
        assert lines[0].startswith(each.rig.title[:40])


def test_text_says_value_interval_and_what_is_not_known(bench: Estimate, bare: Estimate) -> None:
    text = str(bench)
    h = bench.parameters["h"]
    assert re.search(rf"convection coefficient h +{h.median:.1f} ± \d\.\d W/\(m² K\) \(95 %: ", text)
    assert bench.comparison.split()[0] in text
    assert re.search(r"convection coefficient h +not determined", str(bare))
    assert "caution: " in str(bare)


def test_a_limit_reads_as_one() -> None:
    limit = Summary("joint", "joint", "m^2 K/W", None, None, None, 0.0, 4e-6, None, None, "prior")
    assert limit.in_words().startswith("at most 4")
    assert limit.in_words().endswith("(95 %)")


def test_a_notebook_gets_everything_escaped(bench: Estimate) -> None:
    evil = '<script>alert(1)</script> & "quotes"'
    html = replace(bench, rig=replace(bench.rig, title=evil), comparison=evil)._repr_html_()
    assert "<script>" not in html
    assert html.count("&lt;script&gt;") == 2
    assert "&amp;" in html
    assert html.startswith("<table>")


GROUPS = ("posterior", "prior", "log_likelihood", "observed_data", "sample_stats")


def test_netcdf_round_trip(bench: Estimate, tmp_path: Path) -> None:
    file = tmp_path / "posterior.nc"
    bench.to_tree().to_netcdf(str(file), engine="h5netcdf")
    groups = {g: xarray.open_dataset(file, group=g, engine="h5netcdf").load() for g in GROUPS}
    draws = bench.draws
    posterior = groups["posterior"]
    for i, name in enumerate(draws.names):
        np.testing.assert_array_equal(posterior[name].to_numpy(), draws.values[..., i])
    assert posterior["h"].dims == ("chain", "draw")
    assert posterior.attrs["seed"] == "1"
    assert posterior.attrs["run"] == "bench"
    assert "created_at" not in posterior.attrs
    sensors = list(groups["observed_data"]["sensor"].to_numpy())
    assert sensors == list(draws.sensors)
    assert set(sensors) == set(bench.readings.values)
    for sensor in sensors:
        value = float(groups["observed_data"]["reading"].sel(sensor=sensor))
        assert value == bench.readings.values[sensor]
    likelihood = groups["log_likelihood"]["reading"]
    assert likelihood.shape == (*draws.values.shape[:2], len(sensors))
    assert np.isfinite(likelihood).all()
    assert set(np.unique(groups["sample_stats"]["candidate"])) <= set(range(len(bench.candidates)))
    prior = groups["prior"]
    assert {"h", "k", "joint", "air", "plate"} <= set(prior.data_vars)
    assert float(np.log(prior["h"]).std()) == pytest.approx(np.log(10), rel=0.1)  # within a factor of ten
    assert float(prior["k"].std()) == pytest.approx(0.05 * 167, rel=0.1)  # as the rig states


def test_draws_average_over_the_candidates(bench: Estimate) -> None:
    shares = np.bincount(bench.draws.candidate.ravel(), minlength=len(bench.candidates))
    expected = [c.probability for c in bench.candidates]
    np.testing.assert_allclose(shares / shares.sum(), expected, atol=1e-3)
    h = bench.draws.values[..., bench.draws.names.index("h")]
    assert float(np.median(h)) == pytest.approx(bench.parameters["h"].median, rel=1e-9)


def test_the_table_holds_readings_predictions_and_uncertainties(bench: Estimate) -> None:
    rows = {row.sensor: row for row in bench.table}
    assert set(rows) == set(bench.readings.values)
    for name, row in rows.items():
        assert row.measured == bench.readings.values[name]
        assert row.residual == pytest.approx(row.measured - row.predicted)
    assert rows["TP"].uncertainty == pytest.approx(np.hypot(0.15, 0.1), rel=1e-6)
    slope = (rows["T1"].predicted - rows["T2"].predicted) / 0.015  # K/m, roughly, near the base
    assert rows["T1"].uncertainty == pytest.approx(np.hypot(np.hypot(0.15, 0.1), slope * 3e-4), rel=0.05)
    assert rows["Q"].uncertainty == pytest.approx(0.03 * rows["Q"].measured, rel=0.01)


def test_the_band_runs_from_base_to_tip_and_holds_the_fit(bench: Estimate) -> None:
    band = bench.band
    assert band.x[0] == 0.0
    assert band.x[-1] == pytest.approx(0.12)
    assert (band.low95 < band.median).all()
    assert (band.median < band.high95).all()
    base = bench.derived["base_temperature"]
    assert band.median[0] - 273.15 == pytest.approx(base.median, abs=0.1 * base.sd)
    for row in bench.table:
        if row.place == "fin":
            assert np.interp(row.position, band.x, band.median) == pytest.approx(row.predicted, abs=0.2)


def test_assumptions_name_every_unknown_and_what_is_exact(bench: Estimate) -> None:
    lines = "\n".join(bench.priors)
    for label in ("convection coefficient h", "conductivity k", "joint resistance", "plate temperature"):
        assert label in lines
    assert "167 W/(m K) ± 5 % (stated)" in lines
    rod = "\n".join(dataset("aluminium-rod").priors)
    assert "conductivity k: 237" in rod
    assert "exactly" in rod


def test_provenance_names_versions_and_input_hashes(bench: Estimate) -> None:
    found = bench.to_dict()["provenance"]
    assert found["finback"] == finback.__version__
    assert {"python", "numpy", "scipy", "emcee", "arviz"} <= set(found["versions"])
    assert set(found["inputs"]) == {"rig.toml", "readings.csv"}
    assert all(re.fullmatch("[0-9a-f]{64}", digest) for digest in found["inputs"].values())


def test_an_exact_conductivity_has_no_spread() -> None:
    k = dataset("aluminium-rod").parameters["k"]
    assert (k.median, k.sd, k.low95, k.high95) == (237.0, 0.0, 237.0, 237.0)
    assert k.determined_by == "prior"
    rig = pin_rig(conductivity=Quantity(167.0), tip="convective")
    assert finback.fit(rig, exact_readings(rig), seed=1).parameters["k"].sd == 0.0
