"""The budget as the report tells it: nothing is lost between the estimate, the table and the bars."""

from dataclasses import replace

import pytest

from finback.estimate import BudgetLine, Improvement
from finback.report import shares


def test_every_bar_is_full(pin_estimate):
    names, pieces = shares.pieces(pin_estimate)
    assert names == ("h", "k", "h_over_k", "heat")
    for column in range(len(names)):
        drawn = sum(piece.percent[column] for piece in pieces)
        assert 97.0 < drawn <= 100.0 + 1e-9  # a kind whose small ones make less than 1 % is left out
    assert [piece.kind for piece in pieces] == ["random", "random", "systematic", "prior"]
    assert "".join(piece.letter for piece in pieces) == "abcd"


def test_small_sources_of_a_kind_are_one_piece(pin_estimate):
    many = tuple(BudgetLine(f"s{i}", "systematic", {"h": 0.04, "k": 0.0}) for i in range(25))
    names, pieces = shares.pieces(replace(pin_estimate, budget=many))
    assert names == ("h", "k")
    (piece,) = pieces
    assert piece.name == "other systematic ones"
    assert piece.percent == pytest.approx((100.0, 0.0))


def test_the_terminal_names_what_matters(pin_estimate):
    assert shares.in_words(pin_estimate) == (
        "Variance of h: 55 % calibration of the fin sensors, 25 % noise of the heat reading, 12 % "
        "conductivity k, as stated."
    )
    ratio = tuple(
        BudgetLine(b.source, b.kind, {"h_over_k": b.share_of_variance["h_over_k"]})
        for b in pin_estimate.budget
    )
    assert shares.in_words(replace(pin_estimate, budget=ratio)).startswith(
        "Variance of h/k: 62 % calibration"
    )


def test_without_a_budget_nothing_is_told(rod_estimate):
    assert shares.table(rod_estimate) is None
    assert shares.in_words(rod_estimate) == ""
    assert shares.improved(None) == ""


def test_an_improvement_of_h_over_k_goes_by_its_symbol():
    found = shares.improved(
        Improvement("h_over_k", "hole positions", "hole positions known to 0.2 mm", 0.664)
    )
    assert found == "With hole positions known to 0.2 mm the interval of h/k would be 34 % narrower."
