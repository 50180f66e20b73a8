"""The baseline of a campaign: each run by a loop around emcee as an engineer codes it, a pool over the runs.

One invented pin, its tip adiabatic, convective or held at a temperature: each model is fitted and sampled,
one set of parameters at a time, until the chain is 50 autocorrelation times long.
"""

import math

import emcee
import numpy as np
from emcee.autocorr import integrated_time
from scipy.optimize import least_squares

LENGTH, DIAMETER, K, K_SD = 0.120, 0.008, 167.0, 8.35
HOLES = (0.005, 0.035, 0.065, 0.112)
SD, HEAT_SD = 0.2, 0.03
AREA, PERIMETER = math.pi / 4 * DIAMETER**2, math.pi * DIAMETER
TIPS = ("adiabatic", "convective", "fixed")
WALKERS, TIMES, MOST = 32, 50, 20_000


def predict(z, tip):
    """Temperatures [°C] at the holes and the heat into the base [W]; z: ln h, ln k, base, air and tip."""
    h, k, base, air = math.exp(z[0]), math.exp(z[1]), z[2], z[3]
    m = math.sqrt(h * PERIMETER / (k * AREA))
    conductance = math.sqrt(h * PERIMETER * k * AREA)
    excess, mL = base - air, m * LENGTH
    if tip == "fixed":
        end = z[4] - air
        found = [
            air + (end * math.sinh(m * x) + excess * math.sinh(m * (LENGTH - x))) / math.sinh(mL)
            for x in HOLES
        ]
        return found, conductance * (excess * math.cosh(mL) - end) / math.sinh(mL)
    ratio = h / (m * k) if tip == "convective" else 0.0
    bottom = math.cosh(mL) + ratio * math.sinh(mL)
    rests = [m * (LENGTH - x) for x in HOLES]
    found = [air + excess * (math.cosh(rest) + ratio * math.sinh(rest)) / bottom for rest in rests]
    return found, conductance * excess * (math.sinh(mL) + ratio * math.cosh(mL)) / bottom


def residuals(z, tip, run):
    """Whitened residuals of the readings and of what is known of k."""
    temperatures, heat = predict(z, tip)
    found = [(t - measured) / SD for t, measured in zip(temperatures, run[:4], strict=True)]
    return np.array(
        [
            *found,
            (z[3] - run[4]) / SD,
            (heat - run[5]) / (HEAT_SD * run[5]),
            (z[1] - math.log(K)) / (K_SD / K),
        ]
    )


def log_density(z, tip, run):
    """Log posterior density with Finback's wide prior of h."""
    off = residuals(z, tip, run)
    return -0.5 * float(off @ off) - 0.5 * ((z[0] - math.log(50)) / math.log(10)) ** 2


def sample(tip, run, random):
    """Return the draws (n, p) of one model."""
    start = [3.0, math.log(K), run[0], run[4], *([run[3]] if tip == "fixed" else [])]
    fitted = least_squares(residuals, start, args=(tip, run), x_scale="jac")
    root = np.linalg.cholesky(np.linalg.pinv(fitted.jac.T @ fitted.jac) + 1e-12 * np.eye(len(start)))
    around = fitted.x + random.standard_normal((WALKERS, len(start))) @ root.T
    sampler = emcee.EnsembleSampler(WALKERS, len(start), log_density, args=(tip, run))
    state = sampler.run_mcmc(emcee.State(around, random_state=random.get_state()), 200)
    sampler.reset()
    while True:
        state = sampler.run_mcmc(state, 500)
        longest = float(np.max(integrated_time(sampler.get_chain(), tol=0, quiet=True)))
        if sampler.iteration >= min(TIMES * longest, MOST):
            return sampler.get_chain(flat=True)


def estimate(run):
    """Return median and 95 % limits of h for each tip; run: four temperatures, the air [°C], the heat [W]."""
    random = np.random.RandomState(1)
    return {tip: np.exp(np.quantile(sample(tip, run, random)[:, 0], (0.025, 0.5, 0.975))) for tip in TIPS}
