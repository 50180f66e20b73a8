"""Evidence under a wider prior: closed forms, and the same problems posed anew with that prior."""

from dataclasses import replace

import numpy as np
import pytest
from fits import dataset
from rigs import TRUTH, draw, pin_rig
from scipy.stats import norm, truncnorm

from finback import posing, routes, sensitivity
from finback.priors import Normal
from finback.problem import Candidate, Problem

PRIOR = Normal(-9.0, 1.6)
COUNT = 20_000


@pytest.mark.parametrize(("at", "sd"), [(-9.0, 0.1), (-7.0, 0.4), (-11.5, 0.8)])
def test_a_normal_likelihood_has_a_closed_form(at: float, sd: float) -> None:
    """Evidence of one normal reading under a normal prior: normal, with the sum of the variances."""
    precision = sd**-2 + PRIOR.sd**-2
    mean = (at / sd**2 + PRIOR.mean / PRIOR.sd**2) / precision
    z = np.random.default_rng(1).normal(mean, precision**-0.5, COUNT)
    logs = [norm.logpdf(at, PRIOR.mean, np.hypot(sd, width)) for width in (PRIOR.sd, 3 * PRIOR.sd)]
    for twin in (None, 0.0):
        assert sensitivity.log_change(z, PRIOR, twin) == pytest.approx(logs[1] - logs[0], abs=0.05)


@pytest.mark.parametrize("most", [-1.0, 0.0, 1.5])
def test_a_joint_of_which_the_readings_only_see_that_it_is_small(most: float) -> None:
    """Likelihood one up to a largest joint and zero beyond: the evidence is the prior's mass below it."""
    t = truncnorm.rvs(-np.inf, most, size=COUNT, random_state=2)
    narrow, wide = norm.cdf(most), norm.cdf(most / 3)
    found = sensitivity.log_change(PRIOR.mean + PRIOR.sd * t, PRIOR, 1 / narrow)
    assert found == pytest.approx(np.log(wide / narrow), abs=0.03)


def widened(problem: Problem) -> Problem:
    """The problem with the joint's prior three times as wide."""
    wide = [
        replace(p, prior=Normal(p.prior.mean, 3 * p.prior.sd)) if p.name == "joint" else p
        for p in problem.parameters
    ]
    return replace(problem, parameters=tuple(wide))


@pytest.mark.parametrize("joint", [5e-5, 4e-4, 1e-6])
def test_reweighted_draws_give_the_evidence_of_a_new_fit(joint: float) -> None:
    rig = pin_rig(tip="convective")
    readings, _ = draw(rig, replace(TRUTH, joint=joint), np.random.default_rng(5))
    problems = [
        posing.pose(rig, readings, Candidate("convective", with_joint, True)) for with_joint in (True, False)
    ]
    seeds = np.random.SeedSequence(1)
    outcomes = [routes.weigh(problem, seeds).outcome() for problem in problems]
    anew = routes.weigh(widened(problems[0]), seeds).outcome().evidence
    found = sensitivity.of_joint(outcomes)
    assert found is not None
    odds = anew.log - outcomes[1].evidence.log
    names = [outcome.problem.candidate.name for outcome in outcomes]
    assert found.probabilities[names[0]] == pytest.approx(1 / (1 + np.exp(-odds)), abs=0.01)
    assert sum(found.probabilities.values()) == pytest.approx(1.0)


def test_a_wider_prior_takes_from_candidates_with_a_joint_that_is_seen() -> None:
    estimate = dataset("bench-pin")
    found = estimate.sensitivity
    assert found is not None
    assert list(found.probabilities) == [score.name for score in estimate.candidates]
    absent = [score for score in estimate.candidates if ", no joint" in score.name]
    for score in absent:
        assert found.probabilities[score.name] >= score.probability
    assert estimate.to_dict()["sensitivity"]["times_wider"] == 3.0
    assert dataset("aluminium-rod").sensitivity is None  # no plate, no joint
