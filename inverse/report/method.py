"""Method: the paragraph, equations and cautions that go with every report, cut to what the rig has."""

from dataclasses import dataclass

from finback.estimate import Estimate
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
    lines = list(UNIFORM if SHAPES[estimate.rig.profile_name].even else TAPERED)
    lines += [equation for tip, equation in TIPS.items() if tip in names]
    if joint:
        lines.append(Equation("−k θ′(0) = (T_plate − T_b) / R″", "joint at the base, of area resistance R″"))
    lines += [
        Equation(
            "q_b = −k A θ′(0)", "heat into the base of the fin; it separates h from k where it is measured"
        ),
        Equation(
            "ln L(p) = −½ rᵀ C⁻¹ r − ½ ln det 2πC",
            "likelihood of all readings y at once, r = y − f(p); C holds random noise, the calibration error "
            "common to a kind of sensor, and hole positions through dT/dx",
        ),
        Equation("Zᵢ = ∫ Lᵢ(p) πᵢ(p) dp", "evidence of candidate i, with its prior π"),
        Equation("Pᵢ = Zᵢ / Σⱼ Zⱼ", "its probability, all candidates being equally likely beforehand"),
    ]
    return tuple(lines)


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
