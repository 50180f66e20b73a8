"""Words of a diagnosis: what each cause is in plain speech, what to do about it, and how sure a number is."""

from collections.abc import Mapping

from finback.causes import Cause

IS_WRONG: Mapping[str, str] = {
    "joint": "the joint between plate and fin is bad",
    "k": "the fin conducts heat worse than it should",
    "h": "the air takes less heat from the fin than it should",
    "emissivity": "the fin radiates less than it should",
    "tip": "the tip of the fin is not as drawn",
    "air": "{sensor} does not read the air that the fin is in",
    "heat": "{sensor} does not read the heat that flows into the fin",
    "offset": "the thermometer {sensor} reads wrong",
    "shift": "the hole of {sensor} is not where it should be",
    "swap": "the thermometers {sensor} are swapped",
    "misfit": "the temperatures depart from every model in a smooth pattern",
    "scatter": "the thermometers along the fin scatter more than is stated",
    "more": "the air takes more heat from the fin than the rig expects",
}
"""What a cause is, by its kind; "{sensor}" stands for what it concerns."""

REPAIRS: Mapping[str, str] = {
    "joint": "with the power off and the fin cold, open the joint, clean its faces, renew its grease or pad, "
    "tighten it evenly, and measure again",
    "k": "compare the alloy and temper of the fin with its papers, or have a piece of it measured",
    "h": "look for dirt on the fin, a clogged filter or a slow fan, measure the air's speed at the fin, and "
    "measure again once that is put right",
    "emissivity": "see whether the surface of the fin has been polished, coated anew or covered",
    "tip": "see whether something touches or covers the tip of the fin",
    "air": "read the air where it reaches the fin, with a thermometer that is shielded from the fin's heat",
    "heat": "check the meter, and what flows off through leads, insulation and the back of the heater",
    "offset": "compare {sensor} with a good thermometer at one temperature, and replace it if it is off",
    "shift": "measure how far the hole of {sensor} lies from the base, and correct it in rig.toml",
    "swap": "trace the leads of {sensor} to the instrument, and exchange them there or in the table",
    "misfit": "see whether the air reaches all parts of the fin alike, and whether leads carry heat off",
    "scatter": "read the thermometers along the fin at one temperature, and state the noise that they have",
    "more": "check expected_h or the speed of the air in rig.toml",
}
"""What to do about a cause, by its kind."""

SURENESS = (
    (0.99, "practically certain"),
    (0.9, "very likely"),
    (0.75, "likely"),
    (0.5, "more likely than not"),
    (0.2, "possible"),
    (0.0, "unlikely"),
)
"""Words for a probability, from the limit beside them on."""

GAINS = (
    (0.7, "settles most of the doubt"),
    (0.4, "settles about half of the doubt"),
    (0.2, "settles part of the doubt"),
    (0.05, "settles a little of the doubt"),
    (0.0, "tells hardly anything of the cause"),
)
"""Words for what a measurement tells, from that share of the doubt on."""

SETTLED = "no doubt of the cause is left"


def surely(probability: float) -> str:
    """Return how sure a probability is, in words."""
    return next(words for least, words in SURENESS if probability >= least)


def settles(share: float) -> str:
    """Return what a measurement tells that removes this share of the doubt, in words."""
    return next(words for least, words in GAINS if share >= least)


def is_wrong(cause: Cause) -> str:
    """Return what a cause is, as a clause."""
    return _of_kind(IS_WRONG, cause, cause.name)


def repair(cause: Cause) -> str:
    """Return what to do about a cause, as a clause; "" where there is nothing to do."""
    return _of_kind(REPAIRS, cause, "")


def _of_kind(words: Mapping[str, str], cause: Cause, otherwise: str) -> str:
    sensors = f"{cause.sensor} and {cause.other}" if cause.other else cause.sensor or ""
    return words.get(cause.kind, otherwise).replace("{sensor}", sensors)


def sentence(clause: str) -> str:
    """Return a clause as a sentence."""
    return f"{clause[0].upper()}{clause[1:]}." if clause else ""
