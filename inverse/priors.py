"""Priors: what is known of a parameter before the readings, as a normal distribution of its coordinate.

A positive quantity has the coordinate ln(value), so that its prior is log-normal; a temperature is its own
coordinate; a value v between two bounds has ln((v - low)/(high - v)). One family keeps the algebra of the
whole package exact where it is linear.
"""

import math
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Normal:
    """A normal distribution of a coordinate.

    Arguments: mean; sd, positive, both in the coordinate's unit.
    """

    mean: float
    sd: float

    def __post_init__(self) -> None:
        if not (math.isfinite(self.mean) and math.isfinite(self.sd) and self.sd > 0):
            raise ValueError(
                f"a prior needs a finite mean and a positive width, got {self.mean!r}, {self.sd!r}"
            )


def log_normal(median: float, relative_sd: float) -> Normal:
    """Return the prior of ln(value) for a value stated with a relative standard uncertainty [1].

    The sd of the logarithm, sqrt(ln(1 + u²)), is the one for which the value itself has relative sd u.
    """
    return Normal(math.log(median), math.sqrt(math.log1p(relative_sd**2)))


def within_a_factor(median: float, factor: float) -> Normal:
    """Return the wide prior of ln(value) whose one-standard-deviation range is median / and * factor [1]."""
    return Normal(math.log(median), math.log(factor))


def within(value: float, sd: float, low: float, high: float) -> Normal:
    """Return the prior of ln((v - low)/(high - v)) for a value v stated with a standard uncertainty sd.

    Two standard deviations reach as far as stated on the side that has the room; on the other side the bound
    is nearer. A value at a bound is taken a quarter of its sd inside: an emissivity of 1 ± 0.04 is one of
    0.99, and above 0.92 with 97.5 %.
    """
    edge = 1e-3 * (high - low)
    room = min(max(sd / 4, edge), (high - low) / 4)
    inside = min(max(value, low + room), high - room)
    far = inside + 2 * sd if inside - low < high - inside else inside - 2 * sd
    far = min(max(far, low + edge), high - edge)
    centre, away = (math.log((v - low) / (high - v)) for v in (inside, far))
    return Normal(centre, abs(away - centre) / 2)
