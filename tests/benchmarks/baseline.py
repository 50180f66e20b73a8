"""The baseline of the benchmarks: the aluminium rod as an engineer codes it by hand, one set at a time."""

import math

import emcee
import numpy as np
from emcee.autocorr import integrated_time
from scipy.optimize import least_squares

LENGTH, SIDE, K, AIR = 0.7, 0.0095, 237.0, 21.2897


def temperatures(h, base, x):
    """Temperatures [°C] of the rod at x [m], in the textbook form; h [W/(m² K)], base [°C]."""
    m = math.sqrt(h * 4 * SIDE / (K * SIDE**2))
    ratio = h / (m * K)
    bottom = math.cosh(m * LENGTH) + ratio * math.sinh(m * LENGTH)
    found = []
    for position in x:
        rest = m * (LENGTH - position)
        found.append(AIR + (base - AIR) * (math.cosh(rest) + ratio * math.sinh(rest)) / bottom)
    return np.array(found)


def log_density(z, x, measured):
    """Log posterior density at z = (ln h, base, ln noise), with the same priors as Finback's."""
    h, base, noise = math.exp(z[0]), z[1], math.exp(z[2])
    residuals = (measured - temperatures(h, base, x)) / noise
    prior = (z[0] - math.log(50)) ** 2 + (z[2] - math.log(0.2)) ** 2
    return -0.5 * float(residuals @ residuals) - len(x) * z[2] - 0.5 * prior / math.log(10) ** 2


def point_fit(x, measured):
    """Least squares for (ln h, base), from a rough start."""
    return least_squares(lambda z: measured - temperatures(math.exp(z[0]), z[1], x), [2.0, 120.0])


def sample(x, measured, steps=1500, walkers=32, seed=1):
    """Draw with emcee's default move, and return the effective number of draws."""
    random = np.random.RandomState(seed)
    start = point_fit(x, measured).x
    around = np.array([start[0], start[1], math.log(0.25)])
    scatter = np.array([0.007, 0.5, 0.2])
    sampler = emcee.EnsembleSampler(walkers, 3, log_density, args=(x, measured))
    state = emcee.State(
        around + scatter * random.standard_normal((walkers, 3)), random_state=random.get_state()
    )
    sampler.run_mcmc(sampler.run_mcmc(state, 200), steps)
    chain = sampler.get_chain(discard=200)
    return chain.shape[0] * walkers / float(np.max(integrated_time(chain, tol=0, quiet=True)))


def log_densities(z, x, measured):
    """`log_density` of a block (n, 3) at once."""
    h, base, noise = np.exp(z[:, 0]), z[:, 1], np.exp(z[:, 2])
    m = np.sqrt(h * 4 * SIDE / (K * SIDE**2))[:, None]
    ratio = h[:, None] / (m * K)
    rest = m * (LENGTH - x)
    shape = (np.cosh(rest) + ratio * np.sinh(rest)) / (np.cosh(m * LENGTH) + ratio * np.sinh(m * LENGTH))
    residuals = (measured - AIR - (base - AIR)[:, None] * shape) / noise[:, None]
    prior = (z[:, 0] - math.log(50)) ** 2 + (z[:, 2] - math.log(0.2)) ** 2
    squares = np.einsum("ij,ij->i", residuals, residuals)
    return -0.5 * squares - len(x) * z[:, 2] - 0.5 * prior / math.log(10) ** 2


def whole_posterior(x, measured, seed=1, times=50):
    """Fit and sample with emcee, vectorised, until the chain is 50 autocorrelation times long."""
    random = np.random.RandomState(seed)
    start = point_fit(x, measured).x
    around = np.array([start[0], start[1], math.log(0.25)])
    scatter = np.array([0.007, 0.5, 0.2])
    sampler = emcee.EnsembleSampler(32, 3, log_densities, args=(x, measured), vectorize=True)
    state = emcee.State(around + scatter * random.standard_normal((32, 3)), random_state=random.get_state())
    state = sampler.run_mcmc(state, 200)
    sampler.reset()
    while True:
        state = sampler.run_mcmc(state, 500)
        longest = float(np.max(integrated_time(sampler.get_chain(), tol=0, quiet=True)))
        if sampler.iteration >= times * longest:
            flat = sampler.get_chain(flat=True)
            return flat.mean(axis=0), flat.std(axis=0)
