"""Whether posteriors are calibrated: coverage over synthetic rigs, and simulation-based calibration.

    python tests/quality/calibration_study.py cover full 0 2000       coverage of a fixed truth
    python tests/quality/calibration_study.py rank "fixed tip" 0 1000 ranks of truths drawn from the prior

Both print JSON. Every posterior is that of the fast route, for the true candidate. A rank is the posterior
probability below the truth: over truths drawn from the prior, and readings drawn given them, ranks are evenly
spread if and only if everything between prior and weights is right (Talts, Betancourt, Simpson, Vehtari,
Gelman, arXiv 1804.06788). Rigs are invented.
"""

import json
import math
import sys
import zlib
from dataclasses import replace
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1] / "inverse"))

from rigs import ZERO, Truth, draw, exact_readings, pin_rig

from finback import geometry, posing, routes, tails
from finback.parameters import Parameter
from finback.priors import Normal, within, within_a_factor
from finback.problem import Candidate, Problem
from finback.quantity import Quantity
from finback.readings import Readings
from finback.rig import Rig

K = Quantity(167.0, 8.35)
COVERED = {
    "ideal": pin_rig(calibration=0.0, position_sd=0.0, conductivity=K),
    "full": pin_rig(position_sd=0.5e-3, calibration=0.2, diameter=Quantity(0.008, 8e-5), conductivity=K),
}
"""Rigs whose every stated error is drawn: noise alone; calibration, holes, air and diameter as well."""

PRIORS = {
    "h": within_a_factor(45.0, 1.5),
    "k": Normal(math.log(167.0), 0.05),
    "joint": within_a_factor(5e-5, 2.0),
    "plate": Normal(ZERO + 80.0, 15.0),
    "base_temperature": Normal(ZERO + 80.0, 15.0),
    "air": Normal(ZERO + 22.0, 4.0),
    "tip_temperature": Normal(ZERO + 40.0, 8.0),
    "exponent": within(0.25, 0.08, 0.0, 2.0),
    "rise": within(0.0, 0.4, -2.0, 2.0),
    "emissivity": within(0.8, 0.08, 0.0, 1.0),
    "misfit": within_a_factor(0.005, 2.5),
    "noise": within_a_factor(0.15, 1.5),
    "calibration": Normal(0.0, 1.0),
}
"""What truths are drawn from: tighter than the defaults, so that every one of them is a fin."""


def _ranked(**changes: object) -> Rig:
    # errors that are exact whatever the truth: no holes, no lengths, and no share of a reading
    rig = pin_rig(position_sd=0.0, conductivity=K, **changes)
    heat = {
        name: replace(s, noise=0.1, noise_relative=None) for name, s in rig.sensors.items() if name == "Q"
    }
    return replace(rig, sensors={**rig.sensors, **heat})


FAMILIES: dict[str, tuple[Rig, Candidate]] = {
    "adiabatic tip": (_ranked(), Candidate("adiabatic", True, True)),
    "convective tip": (_ranked(), Candidate("convective", True, True)),
    "fixed tip": (_ranked(), Candidate("fixed", True, True)),
    "infinite tip": (_ranked(), Candidate("infinite", True, True)),
    "no joint": (_ranked(), Candidate("convective", False, True)),
    "no plate": (_ranked(places=("air", "heat")), Candidate("convective", False, False)),
    "unstated noise": (_ranked(noise=None, calibration=0.0), Candidate("convective", True, True)),
    "free convection": (_ranked(), Candidate("convective", True, True, "free-convection")),
    "varying h": (_ranked(), Candidate("convective", True, True, "varying")),
    "radiating": (_ranked(), Candidate("convective", True, True, "radiating")),
    "smooth misfit": (_ranked(), Candidate("convective", True, True, misfit=True)),
    "misfit and unstated noise": (
        _ranked(noise=None, calibration=0.0),
        Candidate("convective", True, True, misfit=True),
    ),
    "heavy tails": (_ranked(), Candidate("convective", True, True, heavy_tails=True)),
    "heavy tails and unstated noise": (
        _ranked(noise=None),
        Candidate("convective", True, True, heavy_tails=True),
    ),
}


def cover(name: str, number: int) -> dict[str, list[float]]:
    """Return truth, and limits of the 95 % and the 68 % interval, of each quantity of one synthetic rig."""
    rig = COVERED[name]
    random = np.random.default_rng([21, number])
    readings, truth = draw(rig, Truth(), random)
    problem = posing.pose(rig, readings, Candidate("convective", True, True))
    route = routes.weigh(problem, np.random.SeedSequence([22, number]))
    posterior = route.fast
    values = geometry.spread(route.point.problem, route.mode.z, posterior.z, route.quantities, random)
    true = {"h": truth.h, "k": truth.k, "joint": truth.joint, "h_over_k": truth.h / truth.k}
    limits = (0.025, 0.975, 0.16, 0.84)
    return {
        quantity: [value, *posterior.quantiles(values[quantity], limits).tolist()]
        for quantity, value in true.items()
    }


def rank(name: str, number: int) -> dict[str, float]:
    """Return the posterior probability below the truth of each parameter of one simulation."""
    rig, candidate = FAMILIES[name]
    random = np.random.default_rng([23, zlib.crc32(name.encode()), number])
    known = _known(posing.pose(rig, exact_readings(rig), candidate))
    truth = np.array([random.normal(p.prior.mean, p.prior.sd) for p in known.parameters])
    predicted = known.predict(truth[None])[0]
    sigma = float(np.exp(truth[-1])) if known.noise.estimated else 0.0
    share = float(np.exp(truth[known.n_physical])) if candidate.misfit else 0.0
    # a misfit is a share of the excess temperature that the truth has
    true = posing.linearise(known, truth).noise if candidate.misfit else known.noise
    errors = random.multivariate_normal(np.zeros(len(predicted)), true.covariance(sigma, share))
    if true.heavy:  # Student's t is a normal one over the root of a chi-square over its degrees of freedom
        errors[: true.heavy] /= np.sqrt(random.chisquare(tails.FREEDOM, true.heavy) / tails.FREEDOM)
    if known.shared is not None:
        errors += known.shared @ truth[known.are_shared]
    names = [sensor.name for sensor in known.measured.sensors]
    readings = Readings("drawn", dict(zip(names, (predicted + errors).tolist(), strict=True)))
    problem = replace(_known(posing.pose(rig, readings, candidate)), fixed=known.fixed)
    posterior = routes.weigh(problem, np.random.SeedSequence([24, number])).fast
    below = posterior.weights @ (posterior.z < truth)
    return dict(zip(problem.names, below.tolist(), strict=True))


def _known(problem: Problem) -> Problem:
    """Return the problem with the priors that truths are drawn from."""
    parameters = tuple(Parameter(p.name, PRIORS[p.name], p.stated) for p in problem.parameters)
    return replace(problem, parameters=parameters)


if __name__ == "__main__":
    what, studied, first, last = sys.argv[1], sys.argv[2], int(sys.argv[3]), int(sys.argv[4])
    one = {"cover": cover, "rank": rank}[what]
    json.dump([one(studied, number) for number in range(first, last)], sys.stdout)
