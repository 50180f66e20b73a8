"""Method: the paragraph, equations and cautions that go with every report, cut to what the rig has."""

from dataclasses import dataclass

from finback.candidates import compared_laws
from finback.estimate import Estimate
from finback.problem import HEAVY_TAILS, SMOOTH_MISFIT
from finback.rig import Rig
from finback.shapes import SHAPES


@dataclass(frozen=True, slots=True)
class Equation:
    """One equation as Unicode text, and what it says."""

    text: str
    meaning: str


TIPS = {
    "adiabatic": Equation("θ′(L) = 0", "adiabatic tip: no heat leaves through its face"),
    "convective": Equation("−k θ′(L) = h θ(L)", "convective tip: its face loses heat as the side does"),
    "fixed": Equation("θ(L) = T_tip − T_air", "fixed tip: held at a temperature"),
    "infinite": Equation("θ → 0 for x → ∞", "infinite tip: the fin goes on far beyond its last sensor"),
}

UNIFORM = (
    Equation("d²θ/dx² = m² θ,   θ = T − T_air", "steady conduction along the fin, heat lost from its side"),
    Equation("m² = h P / (k A)", "P perimeter that loses heat, A cross-section: temperatures alone give h/k"),
)
TAPERED = (
    Equation(
        "d/dx(k A dθ/dx) = h P θ,   θ = T − T_air",
        "steady conduction along a fin whose cross-section A and perimeter P change with x, heat lost from "
        "its side",
    ),
    Equation("m² = h P / (k A)", "with P and A at the base: temperatures alone give h/k"),
)
GENERAL = (
    Equation(
        "d/dx(k A dθ/dx) = P q″(T, x),   θ = T − T_air",
        "steady conduction along the fin, whose side loses the flux q″ of a surface law",
    ),
)
FLUXES = {
    "uniform": Equation("q″ = h θ", "uniform h: one coefficient all along the fin"),
    "free-convection": Equation(
        "q″ = h (|θ|/θ_ref)ⁿ θ", "free convection: h is the coefficient at the fin's mean excess θ_ref"
    ),
    "varying": Equation(
        "q″ = h (1 + r (x/L − ½)) θ", "h varying along the fin: h is its mean, r its rise from base to tip"
    ),
}
RADIATION = Equation(
    "q″_rad = ε σ (T⁴ − T_sur⁴)", "added to q″: grey radiation to the surroundings; h is convection alone"
)
CHANGING = Equation(
    "k(T) = k (1 + b (T − T_0))", "the conductivity follows the temperature; k is that at T_0"
)
MISFIT = Equation(
    "C + a² θ(x) θ(x′) exp(−(x − x′)² / 2ℓ²)",
    "smooth misfit: the covariance of readings along a fin whose profile differs from the model by a share "
    "a of its excess temperature, much the same within ℓ = 0.3 L",
)
TAILS = Equation(
    "ln L(p) = −½ (ν + 1) Σᵢ ln(1 + eᵢ² / (ν sᵢ²)) + …,   ν = 4",
    "heavy-tailed noise: the errors eᵢ that each reading along the fin has of its own follow Student's t, "
    "whose scale sᵢ is the stated noise with what the hole's position adds; the calibration error that they "
    "share, and uncertain lengths, are unknowns; … stands for the other readings",
)
BALANCE = Equation(
    "Q = N q_b + A_bare q″(T_plate) + Q_loss", "heat of the plate: N fins, what is bare of it, and its losses"
)

CAUTIONS = (
    "An estimate is no certificate. It holds for this rig, this run and the assumptions listed above; it "
    "does not replace a test to a standard, nor the judgement of a competent engineer.",
    "Fins, plates and heaters stay hot long after the power is off: let them cool, measure, then touch.",
    "Mains-powered heaters: isolate, earth and protect them by a residual-current device before wiring "
    "sensors. Keep hands, hair and leads away from moving fans. Relieve pressure before opening a loop.",
    "Local codes and licensed practice prevail over anything in this report.",
)


def equations(estimate: Estimate) -> tuple[Equation, ...]:
    """Return the equations behind a report: fin, the candidates' tips, joint, likelihood, evidence."""
    joint = any(sensor.place == "plate" for sensor in estimate.rig.sensors.values())
    names = " ".join(score.name for score in estimate.candidates)
    lines = _along(estimate.rig)
    lines += [equation for tip, equation in TIPS.items() if tip in names]
    if joint:
        lines.append(Equation("−k θ′(0) = (T_plate − T_b) / R″", "joint at the base, of area resistance R″"))
    if estimate.rig.plate is not None:
        lines.append(BALANCE)
    lines += [
        Equation(
            "q_b = −k A θ′(0)", "heat into the base of the fin; it separates h from k where it is measured"
        ),
        Equation(
            "ln L(p) = −½ rᵀ C⁻¹ r − ½ ln det 2πC",
            "likelihood of all readings y at once, r = y − f(p); C holds random noise, the calibration error "
            "common to a kind of sensor, and hole positions through dT/dx",
        ),
        *([MISFIT] if any(SMOOTH_MISFIT in score.name for score in estimate.candidates) else []),
        *([TAILS] if any(HEAVY_TAILS in score.name for score in estimate.candidates) else []),
        Equation("Zᵢ = ∫ Lᵢ(p) πᵢ(p) dp", "evidence of candidate i, with its prior π"),
        Equation(
            "Pᵢ = wᵢ Zᵢ / Σⱼ wⱼ Zⱼ",
            "its probability, w being that beforehand: the same for all, a tenth of it with a smooth misfit "
            "or with heavy tails",
        ),
    ]
    return tuple(lines)


def _along(rig: Rig) -> list[Equation]:
    """Return the equations of conduction along the fin and of what its side loses."""
    laws = compared_laws(rig)
    radiates = rig.emissivity is not None or "radiating" in laws
    if laws == ("uniform",) and not radiates and rig.change is None:
        return list(UNIFORM if SHAPES[rig.profile_name].even else TAPERED)
    convective = dict.fromkeys("uniform" if law == "radiating" else law for law in laws)
    lines = [*GENERAL, *(FLUXES[law] for law in convective)]
    return lines + [RADIATION] * radiates + [CHANGING] * (rig.change is not None)


def paragraph(rig: Rig) -> str:
    """Return the method in a paragraph."""
    shape = SHAPES[rig.profile_name]
    what = (
        shape.words if shape.make is not None else "given by a table, with straight lines between its rows,"
    )
    return (
        f"The fin is {what} in steady, one-dimensional conduction. Every measured value, the air's "
        "and the plate's included, is a reading with an uncertainty; every unknown is a parameter with a "
        "prior. The posterior of the unknowns is sampled, and medians and 95 % intervals are read from its "
        "draws, which come from the candidates in proportion to their probabilities. Values with ± are the "
        "posterior's mean and two standard deviations (k = 2 is the coverage factor, not the conductivity); "
        "where the posterior is too skewed for that, the median stands alone beside its interval. Least "
        "squares uses the readings and what the rig states, without the wide priors."
    )
