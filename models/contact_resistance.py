"""Contact resistance: what joints of a kind usually have, as ranges to hold an estimate against.

Area resistances R'' [m² K/W] of clean metal faces. Pressure, finish and the gas between the faces change them
by a factor of ten or more, so a range tells the usual from the unusual and is no prior for one joint.
"""

from dataclasses import dataclass

from finback.models.materials import Evidence
from finback.models.names import UnknownNameError, fold, nearest_names


@dataclass(frozen=True, slots=True)
class JointKind:
    """A kind of joint and the resistances that are usual for it.

    Arguments: name; low and high, area resistance R'' [m² K/W], equal where the source gives one value;
    condition, of pressure, finish or layer; source; evidence, what stands behind the values.
    """

    name: str
    low: float
    high: float
    condition: str
    source: str
    evidence: Evidence

    def holds(self, resistance: float) -> bool:
        """Tell whether an area resistance [m² K/W] is usual: inside the range, to a factor of two.

        Examples:
        >>> kind = find("soldered joint")
        >>> kind.holds(5e-6), kind.holds(1e-4)
        (True, False)

        """
        return self.low / 2 <= resistance <= 2 * self.high


def find(name: str) -> JointKind:
    """Return the kind of joint of a name; case, blanks and hyphens do not count.

    Raises `UnknownNameError`, a ValueError, with the nearest names.
    """
    try:
        return _BY_NAME[fold(name)]
    except KeyError:
        near = nearest_names(name, {each.name: each.name for each in JOINTS}, 3)
        raise UnknownNameError("kind of joint", name, near) from None


_METALS = "Incropera, Fundamentals of Heat and Mass Transfer, 6th ed., Table 3.1"
_FILLED = "Incropera, Fundamentals of Heat and Mass Transfer, 6th ed., Table 3.2"
_HOLMAN = "Holman, Heat Transfer, 10th ed., Table 2-3"
_LIENHARD = "Lienhard and Lienhard, A Heat Transfer Textbook, Table 2.1"
_CENGEL = "Cengel, Heat Transfer, Table 3-2"
_MOULDS = "Autodesk, interface conductances for injection moulds (2016)"
_LAYER = "thickness over conductivity"
_RECALLED, _CHECKED, _COMPUTED = Evidence.RECALLED, Evidence.CHECKED, Evidence.COMPUTED

JOINTS = (
    JointKind("aluminium on aluminium, bare, vacuum, 100 kPa", 1.5e-4, 5e-4, "100 kPa", _METALS, _RECALLED),
    JointKind("aluminium on aluminium, bare, vacuum, 10 MPa", 2e-5, 4e-5, "10 MPa", _METALS, _RECALLED),
    JointKind(
        "aluminium on aluminium, rough, air", 2.75e-4, 2.75e-4, "10 µm rough, 100 kPa", _METALS, _CHECKED
    ),
    JointKind(
        "aluminium on aluminium, ground, air, bolted",
        8.8e-5,
        8.8e-5,
        "2.54 µm rough, 150 °C, 12 to 25 atm",
        _HOLMAN,
        _CHECKED,
    ),
    JointKind(
        "aluminium on aluminium, finely ground, air",
        1.8e-5,
        1.8e-5,
        "0.25 µm rough, 150 °C, 12 to 25 atm",
        _HOLMAN,
        _RECALLED,
    ),
    JointKind("aluminium on aluminium, air", 8.3e-5, 4.5e-4, "1 to 10 atm", _LIENHARD, _RECALLED),
    JointKind("aluminium on aluminium, evacuated", 2.5e-3, 1e-2, "low pressure", _LIENHARD, _RECALLED),
    JointKind("stainless on stainless, bare, vacuum", 6e-4, 2.5e-3, "100 kPa", _METALS, _RECALLED),
    JointKind(
        "stainless on stainless, ground, air",
        5.28e-4,
        5.28e-4,
        "304, 1.14 µm, 20 °C, 40 to 70 atm",
        _HOLMAN,
        _CHECKED,
    ),
    JointKind("copper on copper, bare, vacuum", 1e-4, 1e-3, "100 kPa", _METALS, _RECALLED),
    JointKind("copper on copper, air", 4e-5, 1e-4, "1 to 10 atm", _LIENHARD, _RECALLED),
    JointKind(
        "copper on aluminium, air", 1.8e-5, 2.4e-5, "1.2 to 1.4 µm rough, 5 to 10 MPa", _CENGEL, _CHECKED
    ),
    JointKind("aluminium on aluminium, silicone grease", 7e-6, 7e-6, "100 kPa", _FILLED, _RECALLED),
    JointKind("steel on steel, grease film", 1.3e-5, 3.3e-5, "film of 2 to 5 µm", _MOULDS, _CHECKED),
    JointKind("steel on steel, ground, dry", 2.6e-5, 4e-4, "0 to 15 MPa", _MOULDS, _CHECKED),
    JointKind("aluminium on aluminium, indium foil", 7e-6, 7e-6, "100 kPa", _FILLED, _RECALLED),
    JointKind("silicon on aluminium, epoxy", 2e-5, 9e-5, "0.02 mm", _FILLED, _RECALLED),
    JointKind("epoxied joint", 1.7e-5, 5e-4, "25 to 100 µm of 0.2 to 1.5 W/(m K)", _LAYER, _COMPUTED),
    JointKind("brass on brass, tin solder", 2.5e-6, 1.4e-5, "15 µm", _FILLED, _RECALLED),
    JointKind(
        "soldered joint", 8e-7, 4.3e-6, "50 to 150 µm of 35 to 60 W/(m K), no voids", _LAYER, _COMPUTED
    ),
    JointKind("brazed or welded joint", 1e-7, 2e-6, "25 to 100 µm of 50 to 200 W/(m K)", _LAYER, _COMPUTED),
    JointKind(
        "press or shrink fit, aluminium on steel or copper",
        2e-5,
        1e-4,
        "1 to 10 MPa, room temperature; differential expansion can open it",
        f"read from {_LIENHARD} and {_HOLMAN} at the pressures of press fits",
        _COMPUTED,
    ),
)
"""The kinds of joint that `find` knows."""

_BY_NAME = {fold(each.name): each for each in JOINTS}
