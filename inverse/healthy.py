"""What a healthy fin is: the h, k and joint that it should have by its rig, each with its uncertainty."""

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field, replace
from itertools import combinations

from finback import expectation
from finback.expectation import Expected
from finback.findings import Finding
from finback.hypotheses import State
from finback.parameters import BOUNDS
from finback.priors import Normal, log_normal, within
from finback.readings import Readings
from finback.rig import Rig
from finback.suspects import CHANGES, ODDS, Kind, Suspect

UNSTATED = {"h": 0.20, "k": 0.03, "joint": 0.30}
"""Relative standard uncertainty of what a healthy fin should have, where the rig states a bare value: common
practice. A correlation brings its own."""

UNSTATED_EMISSIVITY = 0.03
"""Standard uncertainty of an emissivity that is stated without one."""

LINES: Mapping[str, str] = {
    "h": 'such as expected_h = "45 W/(m^2 K) +/- 20 %" in [air], or speed = "2.5 m/s" there',
    "k": 'such as conductivity = "167 W/(m K) +/- 5 %" in [material], or the name of a handbook material',
    "joint": 'such as expected = "5e-5 m^2 K/W +/- 30 %" in [joint]',
}
"""What to add to rig.toml for a cause to be judged, with numbers of the rig's own."""

CAUSES: Mapping[str, Kind] = {"h": "h", "k": "k", "joint": "joint", "emissivity": "emissivity"}
SAID = {"h": "film coefficient", "k": "conductivity", "joint": "joint"}


@dataclass(frozen=True)
class Healthy:
    """What the parameters of a healthy fin are.

    `priors` by name, those that the rig tells; `missing`, a sentence for each cause that cannot be judged,
    with the line to add; `rig` with a conductivity that may be wrong; `expected` film coefficient, None where
    the rig does not tell; `findings`, what was assumed.
    """

    rig: Rig
    priors: Mapping[str, Normal]
    expected: Expected | None
    missing: tuple[str, ...] = ()
    findings: tuple[Finding, ...] = field(default=())

    def states(self) -> list[State]:
        """Return the states that the fin may be in: healthy first, then each cause, then two at once."""
        single = [
            (Suspect(CAUSES[name], ODDS[CAUSES[name]]), name, _moved(prior, name))
            for name, prior in self.priors.items()
        ]
        if "h" in self.priors:  # it is what is expected that is wrong then, and not the fin
            single.append((Suspect("more", ODDS["more"]), "h", _moved(self.priors["h"], "more")))
        found = [State((), self.priors)]
        for some in [*((one,) for one in single), *combinations(single, 2)]:
            changed = {name: prior for _, name, prior in some}
            if len(changed) < len(some):  # no fin has less and more of the same
                continue
            found.append(State(tuple(suspect for suspect, *_ in some), {**self.priors, **changed}))
        return found


def expect(rig: Rig, readings: Readings, reads_plate: bool) -> Healthy:
    """Return what a healthy fin should have in this run.

    Arguments: rig, as warm as the run; readings; reads_plate, whether a joint could be seen. Raises
    ValueError for air in which no correlation can be evaluated.
    """
    priors: dict[str, Normal] = {}
    findings: list[Finding] = []
    missing = []

    def state(name: str, value: float, sd: float) -> None:
        relative = sd / value
        if relative == 0:
            relative = UNSTATED[name]
            message = (
                f"No uncertainty is stated for the {SAID[name]} of a healthy fin: it is taken as "
                f"{100 * relative:.0f} %."
            )
            findings.append(Finding("assumed", "note", message, evidence={"key": f"healthy {name}"}))
        priors[name] = log_normal(value, relative)

    expected = expectation.expect(rig, readings)
    if expected is not None:
        state("h", expected.coefficient, expected.sd)
    if rig.conductivity is not None:
        state("k", rig.conductivity.value, rig.conductivity.sd)
        spread = math.sqrt(math.expm1(priors["k"].sd ** 2)) * rig.conductivity.value
        rig = replace(rig, conductivity=replace(rig.conductivity, sd=spread))
    if rig.emissivity is not None:
        emissivity = rig.emissivity
        if emissivity.sd == 0:
            emissivity = replace(emissivity, sd=UNSTATED_EMISSIVITY)
        priors["emissivity"] = within(emissivity.value, emissivity.sd, *BOUNDS["emissivity"])
        rig = replace(rig, emissivity=emissivity)
    if rig.expected_joint is not None and reads_plate:
        state("joint", rig.expected_joint.value, rig.expected_joint.sd)
    wanted = ("h", "k", "joint") if reads_plate else ("h", "k")
    missing = [name for name in wanted if name not in priors]
    told = tuple(_missing(missing, reads_plate))
    return Healthy(rig, priors, expected, told, tuple(findings))


def _missing(names: list[str], reads_plate: bool) -> Iterator[str]:
    for name in names:
        yield (
            f"Nothing says what {SAID[name]} a healthy fin has: to judge it, add a line with your own value, "
            f"{LINES[name]}."
        )
    if not reads_plate:
        yield (
            "Nothing reads the plate, so the joint cannot be judged: add a sensor such as "
            'TP = { on = "plate" } to [sensors], and expected = "5e-5 m^2 K/W +/- 30 %" to [joint].'
        )


def _moved(prior: Normal, name: str) -> Normal:
    """Return what a parameter is once its cause has moved it."""
    shift, spread = CHANGES[name]
    return Normal(prior.mean + shift, math.hypot(prior.sd, spread))
