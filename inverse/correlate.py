"""Correlate: a law through the runs of a campaign, with errors in both axes, beside published ones."""

from collections.abc import Mapping
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from finback import __version__, errors_in_variables, published, results, run_points
from finback.errors_in_variables import Fit, Points
from finback.fast import TRUSTED
from finback.findings import Finding
from finback.power_laws import Law, OffsetLaw, PowerLaw
from finback.published import Compared, Implied, OutOfRange, Typical
from finback.results import Results
from finback.rig import Rig
from finback.run_points import Form, RunPoints, Stated

Array = NDArray[np.float64]
Status = Literal["ok", "caution"]

OUTLYING = 0.5
"""Probability of not belonging from which a run is named."""

MOST_NAMED = 100
"""Outlying runs that are named, the surest first."""

MANY_OUTLYING = 0.1
"""Share of the runs that may be outlying before the law itself is in doubt."""

LITTLE_SPREAD = 0.2
"""Share of the variance of ln x that is errors, from which the exponent hangs on how large these are said to
be."""

TOO_GOOD = 0.005
"""Probability of scattering so little, below which the stated errors are not those of single runs."""

EQUATIONS: Mapping[Form, str] = {
    "reynolds": "Nu = C Re^n Pr^(1/3)",
    "rayleigh": "Nu = C Ra^n",
    "speed": "h = a + b U^n",
}
ABSCISSAE: Mapping[Form, tuple[str, str]] = {
    "reynolds": ("Re", "1"),
    "rayleigh": ("Ra", "1"),
    "speed": ("U", "m/s"),
}
ORDINATES: Mapping[Form, tuple[str, str]] = {
    "reynolds": ("Nu/Pr^(1/3)", "1"),
    "rayleigh": ("Nu", "1"),
    "speed": ("h", "W/(m^2 K)"),
}
UNITS = {"a": "W/(m^2 K)", "b": "W/(m^2 K) at 1 m/s"}
"""Units of the constants that have one."""


@dataclass(frozen=True, slots=True)
class Constant:
    """A constant of the law, or the scatter: its posterior in `unit`."""

    name: str
    unit: str
    median: float
    mean: float
    sd: float
    low95: float
    high95: float


@dataclass(frozen=True, slots=True)
class Outlier:
    """A run that does not belong.

    `probability`; `ratio` of its y to the law's, at its measured x; `deviations`, how many standard
    deviations off that is, errors and scatter together.
    """

    run: str
    probability: float
    ratio: float
    deviations: float


@dataclass(frozen=True, slots=True)
class Band:
    """The law over x: `median` and 95 % limits `low95`, `high95`, and those of a new run's true y."""

    x: Array
    median: Array
    low95: Array
    high95: Array
    new_low95: Array
    new_high95: Array


@dataclass(frozen=True)
class Correlation:
    """What came of a table of runs; SI units.

    `runs`, names of those that were used; `x`, `y`, `x_sd`, `y_sd`, on the axes of the form, without errors
    that all share. Of each: `outlying`, the probability of not belonging; `ratio` to the law at its measured
    x; `deviation` of that in standard deviations; `error`, standard deviation of ln ratio by stated errors
    alone. `compared` and `out_of_range`, published laws, with `curves` over `curve_x`, or `not_compared`,
    why there are none. `speed`, as measured [m/s], beside `implied`. `shared`, errors that all runs share,
    as shares.
    """

    form: Form
    why: str
    title: str | None
    status: Status
    constants: Mapping[str, Constant]
    scatter: Constant
    runs: tuple[str, ...]
    left_out: Mapping[str, int]
    x: Array
    y: Array
    x_sd: Array
    y_sd: Array
    outlying: Array
    ratio: Array
    deviation: Array
    error: Array
    outliers: tuple[Outlier, ...]
    n_outliers: int
    band: Band
    compared: tuple[Compared, ...]
    curve_x: Array
    curves: Mapping[str, Array]
    out_of_range: tuple[OutOfRange, ...]
    not_compared: str | None
    speed: Array | None
    implied: Implied | None
    shared: Mapping[str, float]
    notes: tuple[str, ...]
    findings: tuple[Finding, ...]
    provenance: Mapping[str, Any]

    @property
    def equation(self) -> str:
        """The form, as an engineer writes it."""
        return EQUATIONS[self.form]

    def implied_ratio(self) -> tuple[float, float, int] | None:
        """Return median and standard deviation [1] of implied over measured speed, and of how many runs."""
        if self.implied is None or self.speed is None:
            return None
        logs = np.log(self.implied.speed / self.speed)
        logs = logs[np.isfinite(logs)]
        if not logs.size:
            return None
        middle = float(np.exp(np.median(logs)))
        return middle, middle * float(np.std(logs)), int(logs.size)

    def to_dict(self) -> dict[str, Any]:
        """Return the content of correlation.json."""
        ratio = self.implied_ratio()
        band = self.band
        return {
            "finback": __version__,
            "rig": self.title,
            "form": self.form,
            "equation": self.equation,
            "chosen": self.why,
            "status": self.status,
            "parameters": {name: _told(constant) for name, constant in self.constants.items()},
            "scatter": _told(self.scatter),
            "n_runs": len(self.runs),
            "left_out": dict(self.left_out),
            "range": {
                "quantity": ABSCISSAE[self.form][0],
                "unit": ABSCISSAE[self.form][1],
                "low": float(band.x[0]),
                "high": float(band.x[-1]),
            },
            "n_outliers": self.n_outliers,
            "outliers": [asdict(one) for one in self.outliers],
            "published": {
                "not_compared": self.not_compared,
                "compared": [_without(asdict(one), "curve") for one in self.compared],
                "out_of_range": [asdict(one) for one in self.out_of_range],
            },
            "implied_speed": None
            if ratio is None or self.implied is None
            else {
                "correlation": self.implied.correlation,
                "name": self.implied.name,
                "ratio": ratio[0],
                "ratio_sd": ratio[1],
                "n_runs": ratio[2],
            },
            "band": {
                "x": band.x.tolist(),
                "y": ORDINATES[self.form][0],
                "unit": ORDINATES[self.form][1],
                "median": band.median.tolist(),
                "low95": band.low95.tolist(),
                "high95": band.high95.tolist(),
                "new_low95": band.new_low95.tolist(),
                "new_high95": band.new_high95.tolist(),
            },
            "shared": dict(self.shared),
            "assumed": list(self.notes),
            "findings": [
                {"code": one.code, "severity": one.severity, "message": one.message} for one in self.findings
            ],
            "provenance": dict(self.provenance),
        }


def correlate(
    path: Path | str,
    rig: Rig | None = None,
    form: Form | None = None,
    stated: Stated | None = None,
    seed: int = 1,
) -> Correlation:
    """Fit a law through the runs of a table of results.

    Arguments: path of results.csv, .parquet or .xlsx; rig, whose length and air make h and speed
    dimensionless; form, None for what the table calls for; stated, what is said of the errors and columns;
    seed. Raises InputError for what is wrong with the table, or missing.
    """
    stated = stated or Stated()
    table = results.read(path, run_points.wanted(stated.speed))
    chosen, why = run_points.choose(table, rig) if form is None else (form, "it was asked for")
    placed = run_points.place(table, chosen, rig, stated)
    law: Law = OffsetLaw() if chosen == "speed" else PowerLaw()
    random = np.random.default_rng(seed)
    fit = errors_in_variables.fit(law, placed.points, random)
    moved = _with_shared(fit, placed, random)
    inlying = fit.outlying < OUTLYING
    span = placed.points.x[inlying] if inlying.any() else placed.points.x
    x = np.linspace(float(span.min()), float(span.max()), published.GRID)
    logs = moved.log_values(x)
    typical = _typical(placed)
    prandtl = float(np.median(placed.beside.prandtl)) if placed.beside is not None else None
    compared, others, curves, why_not = _published(placed, typical, x, logs, prandtl)
    implied, not_implied = _implied(placed, typical)
    findings = (*placed.findings, *_of_fit(fit, placed), *not_implied)
    notes = () if placed.body is None else _notes(placed)
    ranked = np.argsort(-fit.outlying, kind="stable")[: int((~inlying).sum())]
    points = placed.points
    names = np.array(table.runs, dtype=object)[placed.kept]
    return Correlation(
        form=chosen,
        why=why,
        title=None if rig is None else rig.title,
        status="caution" if any(one.severity != "note" for one in findings) else "ok",
        constants={
            name: _summary(name, UNITS.get(name, "1"), draws)
            for name, draws in law.constants(moved.draws, fit.pivot).items()
        },
        scatter=_summary("scatter", "1", fit.scatter),
        runs=tuple(names),
        left_out=placed.left_out,
        x=np.exp(points.x),
        y=np.exp(points.y),
        x_sd=np.exp(points.x) * points.sx,
        y_sd=np.exp(points.y) * points.sy,
        outlying=fit.outlying,
        ratio=np.exp(fit.residual),
        deviation=fit.deviation,
        error=_error(fit, points),
        outliers=tuple(
            Outlier(
                str(names[i]), float(fit.outlying[i]), float(np.exp(fit.residual[i])), float(fit.deviation[i])
            )
            for i in ranked[:MOST_NAMED]
        ),
        n_outliers=len(ranked),
        band=_band(x, logs, fit.scatter, random),
        compared=compared,
        curve_x=np.exp(x),
        curves=curves,
        out_of_range=others,
        not_compared=why_not,
        speed=placed.speed,
        implied=implied,
        shared={"h": placed.shared_y, "speed": placed.shared_x, "length": placed.shared_length},
        notes=notes,
        findings=findings,
        provenance=_provenance(table, rig, fit, seed),
    )


def _with_shared(fit: Fit, placed: RunPoints, random: np.random.Generator) -> Fit:
    """Return the fit with the errors that all runs share: one draw of each moves the law of one draw.

    The runs cannot tell of them. A longer length moves Re and Nu up alike, and Ra three times as far.
    """
    n = len(fit.draws)
    along, up, longer = (
        sd * random.standard_normal(n) for sd in (placed.shared_x, placed.shared_y, placed.shared_length)
    )
    powers = 3.0 if placed.form == "rayleigh" else 1.0
    draws = fit.law.moved(fit.draws, along + powers * longer, up + longer)
    return Fit(fit.law, fit.pivot, draws, fit.scatter, fit.outlying, fit.residual, fit.deviation, fit.khat)


def _band(x: Array, logs: Array, scatter: Array, random: np.random.Generator) -> Band:
    """Return the law's band at logarithms x from ln y of its draws (n_draws, len(x))."""
    new = logs + (scatter * random.standard_normal(len(scatter)))[:, None]
    low, median, high = np.exp(np.quantile(logs, (0.025, 0.5, 0.975), axis=0))
    new_low, new_high = np.exp(np.quantile(new, (0.025, 0.975), axis=0))
    return Band(np.exp(x), median, low, high, new_low, new_high)


def _summary(name: str, unit: str, draws: Array) -> Constant:
    low, median, high = (float(q) for q in np.quantile(draws, (0.025, 0.5, 0.975)))
    return Constant(name, unit, median, float(draws.mean()), float(draws.std(ddof=1)), low, high)


def _typical(placed: RunPoints) -> Typical | None:
    if placed.body is None or placed.warm is None:
        return None
    return Typical(placed.body, float(np.median(placed.warm.air)), float(np.median(placed.warm.surface)))


def _published(
    placed: RunPoints, typical: Typical | None, x: Array, logs: Array, prandtl: float | None
) -> tuple[tuple[Compared, ...], tuple[OutOfRange, ...], dict[str, Array], str | None]:
    """Return published laws beside the fitted one, and their curves, or why there are none."""
    if typical is None or placed.beside is None or prandtl is None:
        told = (
            "no rig tells what the fin is to a correlation" if placed.body is None else "no air temperature"
        )
        return (), (), {}, told
    length, k = typical.body.place.length, float(np.median(placed.beside.conductivity))
    nu = float(np.median(placed.beside.kinematic_viscosity))
    to_h = {"speed": 1.0, "rayleigh": k / length, "reynolds": k / length * prandtl ** (1 / 3)}[placed.form]
    at = np.exp(x)
    if placed.form == "rayleigh":
        films = [typical.risen(each) for each in at]
    else:
        speeds = at if placed.form == "speed" else at * nu / length
        films = [typical.blown(each) for each in speeds]
    compared, others = published.compare(typical, films, np.exp(logs) * to_h)
    return compared, others, {one.correlation: np.array(one.curve) / to_h for one in compared}, None


def _implied(placed: RunPoints, typical: Typical | None) -> tuple[Implied | None, tuple[Finding, ...]]:
    """Return the speeds that the runs' coefficients imply, where a speed was measured to set beside."""
    if typical is None or placed.beside is None or placed.form == "rayleigh":
        return None, ()
    if placed.h is None or placed.h_sd is None or placed.speed is None:
        return None, ()
    implied = published.implied_speeds(
        typical,
        placed.h,
        placed.h_sd,
        np.asarray(placed.beside.conductivity),
        np.asarray(placed.beside.kinematic_viscosity),
    )
    lost = int(np.isnan(implied.speed).sum())
    if not lost:
        return implied, ()
    message = (
        f"The h of {lost} runs belongs to no speed from {published.SLOWEST:g} to {published.FASTEST:g} m/s "
        f"by {implied.name}."
    )
    return implied, (Finding("out-of-range", "note", message, evidence={"key": "implied_speed"}),)


def _of_fit(fit: Fit, placed: RunPoints) -> list[Finding]:
    """Return what the fit itself has to say."""
    from scipy.stats import chi2

    found = []
    points = placed.points
    n = len(points)
    if fit.khat is not None and fit.khat > TRUSTED:
        message = (
            f"The posterior is too bent for its draws (k-hat {fit.khat:.2f}, trusted up to {TRUSTED}): read "
            "the intervals as rough; more runs, or runs further apart, make it regular."
        )
        found.append(Finding("not-converged", "caution", message, evidence={"khat": fit.khat}))
    share = float(np.mean(np.square(points.sx)) / points.x.var())
    if share > LITTLE_SPREAD:
        message = (
            f"Errors make {100 * min(share, 1.0):.0f} % of the variance along the abscissa: the exponent "
            "hangs on how large they are said to be; add runs further apart."
        )
        found.append(Finding("not-determined", "caution", message, evidence={"share": share}))
    outlying = int((fit.outlying >= OUTLYING).sum())
    if outlying > MANY_OUTLYING * n:
        message = (
            f"{outlying} of {n} runs do not belong to the law: it may be the wrong form, or the runs of "
            "several rigs; look at the residuals."
        )
        found.append(Finding("misfit", "caution", message, evidence={"outliers": float(outlying)}))
    error = _error(fit, points)
    within = (fit.outlying < OUTLYING) & (error > 0)
    freedom = int(within.sum()) - len(fit.law.names)
    if freedom > 0 and points.sy.any():
        sum_of_squares = float(np.square(fit.residual[within] / error[within]).sum())
        p = float(chi2.cdf(sum_of_squares, freedom))
        if p < TOO_GOOD:
            message = (
                f"The runs scatter {np.sqrt(sum_of_squares / freedom):.2g} times as much as their stated "
                "errors would make them: a part of these errors is shared by all runs; state it with "
                "--shared-h or --shared-speed, or the law looks surer than it is."
            )
            found.append(Finding("misfit", "caution", message, evidence={"p_value": p}))
    return found


def _error(fit: Fit, points: Points) -> Array:
    """Return the standard deviation in ln y that stated errors make, those of x by the law's slope."""
    xi = (points.x - fit.pivot)[None, :, None]
    slope = fit.law.slope(np.median(fit.draws, axis=0)[None], xi)[0, :, 0]
    found: Array = np.sqrt(np.square(points.sy) + np.square(slope * points.sx))
    return found


def _notes(placed: RunPoints) -> tuple[str, ...]:
    body = placed.body
    assert body is not None
    around = body.rig.surroundings
    return (
        *body.notes,
        *(() if around.pressure is not None else ("the air is at 1013 hPa",)),
        *(() if around.humidity is not None else ("the air is dry",)),
    )


def _provenance(table: Results, rig: Rig | None, fit: Fit, seed: int) -> dict[str, Any]:
    return {
        "seed": seed,
        "method": "normal about the mode" if fit.khat is None else "weighted draws",
        "draws": len(fit.draws),
        "khat": None if fit.khat is None or not np.isfinite(fit.khat) else fit.khat,
        "results": table.source.name,
        "results_sha256": table.sha256,
        "rig_sha256": None if rig is None else rig.sha256,
    }


def _told(constant: Constant) -> dict[str, Any]:
    return _without(asdict(constant), "name")


def _without(document: dict[str, Any], key: str) -> dict[str, Any]:
    return {name: value for name, value in document.items() if name != key}
