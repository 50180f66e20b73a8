import math
from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st

from finback.estimate import Expanded, Summary
from finback.report import phrases

H = Summary("h", "convection coefficient h", "W/(m^2 K)", 41.2, 41.3, 0.9, 39.6, 43.1, 41.0, 0.95, "readings")
LIMIT = Summary(
    "joint", "joint resistance R''", "m^2 K/W", None, None, None, 0.0, 1.234e-5, None, None, "prior"
)
NOTHING = replace(LIMIT, low95=None, high95=None)


def test_a_value_is_stated_with_its_expanded_uncertainty():
    assert phrases.value(H) == "41.3 W/(m² K) ± 1.8 W/(m² K)"
    assert phrases.median(H) == "41.2 W/(m² K)"
    assert phrases.interval(H) == "39.6 to 43.1 W/(m² K)"
    assert phrases.least_squares(H) == "41.00 ± 0.95"


@pytest.mark.parametrize(
    ("value", "uncertainty", "text"),
    [
        (10.05762, 0.027, "10.058"),  # JCGM 100:2008 (GUM), 7.2.6: 10,057 62 Ω with 27 mΩ becomes 10,058 Ω
        (100.02147, 0.00079, "100.02147"),  # the same, 7.2.4: (100,021 47 ± 0,000 79) g
        (0.0, 0.3, "0.00"),
        (-0.001, 0.3, "0.00"),
        (-1.5, 0.36, "−1.50"),
        (184_140.0, 2790.0, "184100"),
        (9.4e-4, 0.13, "0.00"),
        (5.01e-5, 0.66e-5, "5.01 × 10⁻⁵"),
        (1.84e6, 28_000.0, "1.840 × 10⁶"),
        (2.0, 0.0996, "2.00"),
        (237.0, 0.0, "237"),
        (21.2897, 0.0, "21.29"),
    ],
)
def test_a_number_is_rounded_by_its_uncertainty(value, uncertainty, text):
    assert phrases.number(value, uncertainty) == text


def test_both_numbers_share_one_power_of_ten():
    assert phrases.plus_minus(5.01e-5, 0.66e-5, "m^2 K/W") == "5.01 × 10⁻⁵ m² K/W ± 0.66 × 10⁻⁵ m² K/W"
    assert phrases.compact(5.01e-5, 0.66e-5) == "(5.01 ± 0.66) × 10⁻⁵"
    assert phrases.span(4.36e-5, 5.66e-5, "m^2 K/W") == "(4.36 to 5.66) × 10⁻⁵ m² K/W"


def test_the_uncertainty_of_a_temperature_is_in_kelvin():
    assert phrases.plus_minus(79.98, 0.3, "degC") == "79.98 °C ± 0.30 K"


def test_a_skewed_posterior_is_not_stated_with_plus_and_minus():
    skewed = replace(H, median=1.0, mean=1.6, sd=2.0, low95=0.1, high95=7.0)
    assert phrases.value(skewed) == "1.0 W/(m² K)"
    assert phrases.interval(skewed) == "0.1 to 7.0 W/(m² K)"


def test_a_linear_uncertainty_that_misses_the_interval_is_marked():
    holds = Expanded(41.2, 1.8, True)
    assert phrases.expanded(holds) == "41.2 ± 1.8"
    assert phrases.expanded(replace(holds, linear=False)) == "41.2 ± 1.8 †"
    assert phrases.expanded(None) == "–"
    assert phrases.bent(holds, "W/(m^2 K)") == phrases.bent(None, "W/(m^2 K)") == ""
    told = phrases.bent(replace(holds, linear=False), "W/(m^2 K)")
    assert told == (
        "too bent for linear propagation, which gives 41.2 W/(m² K) ± 1.8 W/(m² K): go by the interval"
    )


def test_an_exact_value_has_no_uncertainty_at_all():
    exact = replace(H, median=237.0, mean=237.0, sd=0.0, low95=237.0, high95=237.0, standard_error=0.0)
    assert phrases.value(exact) == "237 W/(m² K)"
    assert phrases.interval(exact) == phrases.least_squares(exact) == "–"
    assert phrases.determined_by(exact) == "exactly known, as the rig states"


def test_an_upper_limit_alone_is_told_as_one():
    assert phrases.value(LIMIT) == "at most 1.23 × 10⁻⁵ m² K/W (95 %)"
    assert phrases.interval(LIMIT) == "at most 1.23 × 10⁻⁵ m² K/W"


def test_what_is_not_determined_is_not_a_number():
    assert phrases.value(NOTHING) == "not determined"
    for text in (phrases.median, phrases.interval, phrases.least_squares):
        assert text(NOTHING) == "–"
    assert phrases.number(math.nan, 1.0) == "–"


@given(st.floats(-1e12, 1e12), st.floats(1e-9, 1e12))
def test_rounding_moves_a_number_by_less_than_its_uncertainty_can_tell(value, uncertainty):
    text = phrases.number(value, uncertainty)
    digits, _, power = text.replace("−", "-").partition(" × 10")
    exponent = int(power.translate(str.maketrans("⁻⁰¹²³⁴⁵⁶⁷⁸⁹", "-0123456789")) or 0)
    shown = float(digits) * 10.0**exponent
    assert abs(shown - value) <= 0.051 * uncertainty + 1e-9 * abs(
        value
    )  # half of the last of two digits, 1 of 10


@pytest.mark.parametrize(
    ("p", "alone", "text"),
    [(0.931, False, "93.1 %"), (1.0, False, "> 99.9 %"), (1.0, True, "100.0 %"), (0.0, False, "< 0.1 %")],
)
def test_no_candidate_is_certain_or_impossible_by_rounding(p, alone, text):
    assert phrases.probability(p, alone) == text


def test_user_text_is_one_harmless_line():
    assert phrases.clean("a\x1b[31m\tb\n\u202ec") == "a�[31m b �c"
    assert len(phrases.clean("x" * 1000)) == 200
