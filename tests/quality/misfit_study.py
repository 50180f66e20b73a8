"""Whether intervals hold where no candidate is right: an h that varies along the fin, and where one is.

    python tests/quality/misfit_study.py varying 0 200     h rises or falls by 40 % of its mean along the fin
    python tests/quality/misfit_study.py ideal 0 200       it does not

Prints JSON: for each rig the truth, the 95 % interval over all candidates and over those without a smooth
misfit, and the probability of a smooth misfit. Every posterior is that of the fast route. Rigs are invented.
"""

import json
import sys
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1] / "inverse"))

from calibration_study import COVERED
from rigs import Truth, draw

from finback import candidates, geometry, summaries
from finback.routes import Outcome

RIG = COVERED["ideal"]
LIMITS = (0.025, 0.975)
RISES = {"varying": 0.4, "ideal": None}
"""Of h from base to tip over its mean, up and down by turns: from 20 % below the mean to 20 % above."""


def repeat(name: str, number: int) -> dict[str, list[float] | float]:
    """Recover h of one rig: truth, limits over all candidates, limits without a smooth misfit."""
    random = np.random.default_rng([31, number])
    readings, truth = draw(RIG, Truth(rise=RISES[name] and RISES[name] * (-1) ** number), random)
    outcomes = [route.outcome() for route in candidates.weigh(RIG, readings, number, lambda *_: None)]
    outcomes.sort(key=lambda outcome: -outcome.log_weight)
    plain = [outcome for outcome in outcomes if not outcome.problem.candidate.misfit]
    probabilities = candidates.probabilities(outcomes)
    smooth = sum(p for p, o in zip(probabilities, outcomes, strict=True) if o.problem.candidate.misfit)
    return {"h": [truth.h, *limits(outcomes, random), *limits(plain, random)], "misfit": float(smooth)}


def limits(outcomes: list[Outcome], random: np.random.Generator) -> list[float]:
    """Return the limits of h, averaged over candidates."""
    evaluated = []
    for outcome in outcomes:
        z = outcome.draws.reshape(-1, outcome.draws.shape[-1])
        values = {"h": np.asarray(outcome.problem.values(z)["h"])}
        evaluated.append(geometry.spread(outcome.problem, outcome.mode.z, z, values, random))
    mixed = summaries.mix(outcomes, candidates.probabilities(outcomes), evaluated)
    return np.quantile(mixed.values["h"], LIMITS).tolist()


if __name__ == "__main__":
    studied, first, last = sys.argv[1], int(sys.argv[2]), int(sys.argv[3])
    json.dump([repeat(studied, number) for number in range(first, last)], sys.stdout)
