"""Convergence diagnostics, leave-one-out scores and the netCDF form of a posterior: the one module on arviz.

arviz 0.23 serves Python 3.11 and arviz 1.x newer ones; their differences end here. Loaded when first used.
"""

import warnings
from types import ModuleType
from typing import Any

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

ENOUGH_FOR_RHAT = 1000  # draws an ensemble: R-hat's own scatter is then 0.001
LOO_DRAWS = 500  # draws an ensemble


def _arviz() -> ModuleType:
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # arviz announces its own refactoring on import
        import arviz

    return arviz


def ensemble_rhat(z: Array) -> float:
    """Return the largest rank-normalised R-hat [1] over parameters; z (ensembles, steps, walkers, p)."""
    ensembles, steps, walkers, p = z.shape
    flat = z.reshape(ensembles, steps * walkers, p)
    stride = max(1, flat.shape[1] // ENOUGH_FOR_RHAT)
    # an odd stride never falls in step with the walkers
    thinned = flat[:, :: stride + (stride % 2 == 0)]
    arviz = _arviz()
    return max(float(arviz.rhat(np.ascontiguousarray(thinned[:, :, i]))) for i in range(p))


def ensemble_ess(z: Array) -> float:
    """Return the smallest effective sample size, of means and 95 % limits; z (ensembles, steps, walkers, p).

    The Monte Carlo error of an ensemble's running average decides, so that walkers count only as far as they
    are independent of each other.
    """
    arviz = _arviz()
    low, high = np.quantile(z, (0.025, 0.975), axis=(0, 1, 2))
    smallest = np.inf
    for i in range(z.shape[-1]):
        for draws in (z[..., i], (z[..., i] < low[i]).astype(float), (z[..., i] > high[i]).astype(float)):
            averages = draws.mean(axis=2)
            spread = float(averages.var())
            if spread > 0:
                steps = float(arviz.ess(averages, method="mean"))
                smallest = min(smallest, steps * float(draws.var()) / spread)
            else:
                smallest = 0.0
    return float(np.nan_to_num(smallest, nan=0.0))


def loo(pointwise: Array) -> tuple[float, float]:
    """Return the expected log predictive density by leave-one-out [nats] and its largest Pareto k-hat [1].

    Argument: pointwise log likelihood (chains, draws, n_readings).
    """
    arviz = _arviz()
    chains, draws = pointwise.shape[:2]
    tree = _tree(posterior={"draw_number": np.zeros((chains, draws))}, log_likelihood={"reading": pointwise})
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # a high k-hat is returned, not printed
        found = arviz.loo(tree, pointwise=True)
    value = found.elpd_loo if hasattr(found, "elpd_loo") else found.elpd
    return float(value), float(np.max(np.asarray(found.pareto_k)))


def tree(groups: dict[str, dict[str, Array]], sensors: tuple[str, ...], attributes: dict[str, str]) -> Any:
    """Return arviz's container of a posterior, which has `to_netcdf(path, engine=...)`.

    Arguments: groups, arrays by group and variable; the variable "reading" has the dimension "sensor";
    sensors, its coordinate; attributes, kept with the posterior.
    """
    made = _tree(
        **groups,
        coords={"sensor": list(sensors)},
        dims={"reading": ["sensor"]},
    )
    posterior = made["posterior"]
    posterior.attrs.clear()  # a date would make equal results differ
    posterior.attrs.update(attributes)
    return made


def _tree(**parts: Any) -> Any:
    arviz = _arviz()
    if arviz.__version__.startswith("0."):
        return arviz.from_dict(**parts)
    options = {name: parts.pop(name) for name in ("coords", "dims") if name in parts}
    return arviz.from_dict(parts, **options)
