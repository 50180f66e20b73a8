"""One run of a campaign: what a fit says, by the fast route; a Markov chain where its weights ask for one."""

from collections.abc import Sequence
from dataclasses import replace
from types import SimpleNamespace

import fits
import numpy as np
import pytest
from campaigns import RIG, SENSORS, rows

from finback import fast, pareto, quick, readings, rig
from finback.estimate import CandidateScore
from finback.problem import SMOOTH_MISFIT
from finback.readings import Readings

DESCRIBED = rig.read_bytes(RIG.encode())


def run(number: int = 0, **changed: float) -> Readings:
    row = rows(number + 1)[number]
    values = {name: float(cell) + 273.15 for name, cell in zip(SENSORS[:-1], row[1:], strict=False)}
    return Readings(row[0], {**values, "Q": float(row[6]), **changed})


def without_misfit(scores: Sequence[CandidateScore]) -> float:
    """Return the probability of the best candidate among those without a misfit, of which few are weighed."""
    plain = [score.probability for score in scores if SMOOTH_MISFIT not in score.name]
    return plain[0] / sum(plain)


@pytest.mark.parametrize("name", ["bench-pin", "bench-pin-loose-joint", "copper-pin"])
def test_it_says_what_a_fit_says(name: str) -> None:
    fitted = fits.dataset(name)
    described = rig.read(fits.DATASETS / name / "rig.toml")
    found = quick.estimate(
        described, readings.read(fits.DATASETS / name / "readings.csv", described).pick(), 1
    )
    assert found.status == fitted.status
    assert found.scores[0].name == fitted.candidates[0].name
    assert without_misfit(found.scores) == pytest.approx(without_misfit(fitted.candidates), abs=0.02)
    of_the_rig = {finding.message for finding in described.assumed}
    told = [f.code for f in fitted.findings if f.message not in of_the_rig and "AICc" not in f.message]
    assert {finding.code for finding in found.findings} >= {code for code in told if code != "not-determined"}
    for quantity, summary in {**fitted.parameters, **fitted.derived}.items():
        own = found.found[quantity]
        assert (own.median is None) == (summary.median is None)
        if summary.median is not None and summary.sd:
            assert own.median == pytest.approx(summary.median, abs=0.12 * summary.sd)
            assert own.sd == pytest.approx(summary.sd, rel=0.12)


def test_the_same_run_and_seed_give_the_same_and_another_name_its_own_draws() -> None:
    one, same = (quick.estimate(DESCRIBED, run(), 1).found["h"] for _ in range(2))
    other = quick.estimate(DESCRIBED, replace(run(), run="another"), 1).found["h"]
    assert one == same
    assert one.median != other.median
    assert one.median == pytest.approx(other.median, abs=0.1 * one.sd)


def test_a_wrong_reading_is_set_aside_as_in_a_fit() -> None:
    found = quick.estimate(DESCRIBED, run(T2=run().values["T2"] + 8.0), 1)
    finding = next(finding for finding in found.findings if finding.sensor == "T2")
    assert finding.severity == "fault"
    assert next(row for row in found.table if row.sensor == "T2").excluded is not None
    clean = quick.estimate(DESCRIBED, run(), 1).found["h"]
    assert found.found["h"].median == pytest.approx(clean.median, abs=2 * clean.sd)


def test_a_chain_takes_over_where_the_weights_are_not_trusted(monkeypatch: pytest.MonkeyPatch) -> None:
    weighed = quick.estimate(DESCRIBED, run(), 1)
    assert weighed.sampler.ess_min is None
    monkeypatch.setattr(fast, "TRUSTED", -10.0)
    sampled = quick.estimate(DESCRIBED, run(), 1)
    assert sampled.sampler.ess_min >= 1000
    assert sampled.found["h"].median == pytest.approx(
        weighed.found["h"].median, abs=0.1 * weighed.found["h"].sd
    )


def route(khat: float, log_evidence: float, random: np.random.Generator) -> SimpleNamespace:
    """Return what stands for a candidate whose weights have a tail of this shape."""
    ratios = np.log(pareto_tail(khat, random))
    values = {"h": random.normal(40.0, 1.0, len(ratios))}
    posterior = SimpleNamespace(
        log_ratios=ratios, evidence=SimpleNamespace(log=float(np.log(np.exp(ratios).mean())))
    )
    khats = {"z": 0.0, "h": pareto.shape(np.exp(ratios) * np.square(values["h"] - 40.0))}
    return SimpleNamespace(fast=posterior, quantities=values, khats=khats, log_weight=log_evidence)


def pareto_tail(shape: float, random: np.random.Generator) -> np.ndarray:
    return (1 - random.random(4096)) ** -shape


def test_a_doubtful_candidate_is_left_where_the_average_over_all_is_sound() -> None:
    random = np.random.default_rng(3)
    sound, doubtful = route(0.1, 0.0, random), route(0.9, 0.0, random)
    assert doubtful.khats["h"] > fast.TRUSTED
    few = quick._mistrusted([sound, doubtful], np.array([0.97, 0.03]))
    half = quick._mistrusted([sound, doubtful], np.array([0.5, 0.5]))
    assert few == [False, False]  # it has no part to speak of
    assert half == [False, True]
    doubtful.khats["h"], doubtful.khats["z"] = 0.0, 0.8  # its evidence is in doubt
    assert quick._mistrusted([sound, doubtful], np.array([0.9, 0.1])) == [False, True]


def test_candidates_without_a_part_are_left_out() -> None:
    candidate = SimpleNamespace(joint=False, misfit=False)

    def named(log: float, **changed: bool) -> SimpleNamespace:
        return SimpleNamespace(
            log_weight=log,
            point=SimpleNamespace(
                problem=SimpleNamespace(candidate=SimpleNamespace(**{**vars(candidate), **changed}))
            ),
        )

    best, near, far = named(0.0, misfit=True), named(-3.0), named(-9.0)
    assert quick._with_a_part([best, near, far]) == [best, near]
    lone_joint = named(-9.0, joint=True)
    assert quick._with_a_part([best, near, lone_joint]) == [
        best,
        near,
        lone_joint,
    ]  # the joint's average is its
