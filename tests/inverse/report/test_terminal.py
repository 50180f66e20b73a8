from dataclasses import replace

import pytest
from rich.cells import cell_len

from finback.report import terminal

PIN = """\
Invented pin, bench 2
run hot-3: done, with cautions

h     = 42.0 W/(m² K) ± 1.9 W/(m² K) (k = 2, 95 %)
        median 42.0 W/(m² K), 95 % interval 40.1 to 43.9 W/(m² K)
        total coefficient: convection and radiation together
        determined by the readings

k     = 166.1 W/(m K) ± 9.5 W/(m K) (k = 2, 95 %)
        median 165.9 W/(m K), 95 % interval 157.2 to 175.8 W/(m K)
        conductivity
        determined by the readings together with what was known beforehand

R″    = 5.2 × 10⁻⁵ m² K/W ± 1.7 × 10⁻⁵ m² K/W (k = 2, 95 %)
        median 5.1 × 10⁻⁵ m² K/W, 95 % interval (3.8 to 7.1) × 10⁻⁵ m² K/W
        joint resistance
        determined by the readings
        too bent for linear propagation, which gives 5.1 × 10⁻⁵ m² K/W ± 1.1 ×
        10⁻⁵ m² K/W: go by the interval

Uncertainty
  Variance of h: 55 % calibration of the fin sensors, 25 % noise of the heat
  reading, 12 % conductivity k, as stated. With the fin sensors calibrated to
  0.1 K the interval of h would be 30 % narrower.

Candidates
  93.1 %  convective tip, joint
   6.2 %  adiabatic tip, joint
   0.7 %  convective tip, no joint
 < 0.1 %  infinite tip, joint
  The readings favour a convective tip with a joint (probability 0.93).
  Surface law: uniform h alone; the rig leaves the tip open.

Findings
  caution sensor-outlier: T6 lies 1.5 K below what the others say.
  Defaults were used (2); the report lists them.

Report  out/report.html"""

ROD = """\
Invented long bar
run A: done, with cautions

h       not determined
        total coefficient: convection and radiation together
        The readings along the fin determine h/k only: state the conductivity
        or measure the heat.

k       not determined
        conductivity
        The readings along the fin determine h/k only: state the conductivity
        or measure the heat.

R″      not looked at
        joint resistance
        It needs a temperature on the plate side of the joint.

h/k   = 0.0801 1/m ± 0.0011 1/m (k = 2, 95 %)
        median 0.0801 1/m, 95 % interval 0.0791 to 0.0813 1/m
        ratio h/k
        determined by the readings

Candidates
 100.0 %  convective tip
  One candidate was looked at: convective tip.
  Surface law: uniform h alone; the tip is as stated.

Findings
  caution not-determined: The readings along the fin determine h/k only: state
          the conductivity or measure the heat."""


def test_the_whole_summary_of_the_pin(pin_estimate):
    assert terminal.summary(pin_estimate, "out") == PIN


def test_the_whole_summary_of_the_rod_that_was_not_written_anywhere(rod_estimate):
    assert terminal.summary(rod_estimate) == ROD


def test_no_name_can_write_to_the_terminal_or_be_read_as_markup(hostile_estimate):
    text = terminal.summary(hostile_estimate, "out")
    assert all(character.isprintable() or character == "\n" for character in text)
    assert "<script>alert(1)</script>" in text
    assert "[bold]T6[/bold] lies 1.5 K below" in text


@pytest.mark.parametrize("title", ["x" * 300, "冷却フィン " * 30, "words and words " * 30])
def test_lines_fit_80_columns_whatever_the_title(pin_estimate, title):
    titled = replace(pin_estimate, rig=replace(pin_estimate.rig, title=title))
    *lines, path = terminal.summary(titled, "a folder with a rather long name/" * 6).splitlines()
    assert path.endswith("name/report.html")  # in one piece, to be copied
    assert max(cell_len(line) for line in lines) <= 79
    assert not any(line.endswith(" ") for line in lines)
