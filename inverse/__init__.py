"""Finback: convection coefficient, conductivity and joint resistance from temperatures along a fin.

    import finback

    estimate = finback.fit("rig.toml", "readings.csv", seed=1)
    print(estimate)

The names below are loaded when they are first used, so that `import finback` costs nothing.
"""

from importlib import import_module
from typing import TYPE_CHECKING, Any

__version__ = "0.1.0"

if TYPE_CHECKING:
    from finback.analysis import fit
    from finback.diagnosis import Diagnosis, diagnose
    from finback.errors import ComputationError, FinbackError, InputError
    from finback.estimate import Estimate
    from finback.findings import Finding
    from finback.quantity import Quantity
    from finback.readings import Readings
    from finback.readings import read as read_readings
    from finback.rig import Rig, Sensor
    from finback.rig import read as read_rig

__all__ = [
    "ComputationError",
    "Diagnosis",
    "Estimate",
    "FinbackError",
    "Finding",
    "InputError",
    "Quantity",
    "Readings",
    "Rig",
    "Sensor",
    "__version__",
    "diagnose",
    "fit",
    "read_readings",
    "read_rig",
]

_PLACES = {
    "ComputationError": ("finback.errors", "ComputationError"),
    "Diagnosis": ("finback.diagnosis", "Diagnosis"),
    "Estimate": ("finback.estimate", "Estimate"),
    "FinbackError": ("finback.errors", "FinbackError"),
    "Finding": ("finback.findings", "Finding"),
    "InputError": ("finback.errors", "InputError"),
    "Quantity": ("finback.quantity", "Quantity"),
    "Readings": ("finback.readings", "Readings"),
    "Rig": ("finback.rig", "Rig"),
    "Sensor": ("finback.rig", "Sensor"),
    "diagnose": ("finback.diagnosis", "diagnose"),
    "fit": ("finback.analysis", "fit"),
    "read_readings": ("finback.readings", "read"),
    "read_rig": ("finback.rig", "read"),
}


def __getattr__(name: str) -> Any:
    try:
        module, member = _PLACES[name]
    except KeyError:
        raise AttributeError(f"module 'finback' has no attribute {name!r}") from None
    value = globals()[name] = getattr(import_module(module), member)
    return value


def __dir__() -> list[str]:
    return sorted({*globals(), *__all__})
