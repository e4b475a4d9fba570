"""Sentences that state results: each rule with data that makes it true, false, 0, 1 and many."""

import pytest

from projector.report import words
from projector.report.numbers import Money
from projector.report.words import Outcome

MONEY = Money("$", 1e6, "million")
NEAR = "Smallest margin: $0.0 million in S2 Name, close to the limit."
TWO = "S3 Name and S2 Name"
ONE = "1 may be below the limit."


def outcomes(*values, limit=0.0):
    return [Outcome(f"S{k} Name", v * 1e6, v * 1e6 >= limit) for k, v in enumerate(values, start=1)]


@pytest.mark.parametrize(
    ("values", "allowed", "sentence"),
    [
        ((3, 1.5, 2), 0, "Criterion met in 3 of 3 scenarios. Smallest margin: $1.5 million in S2 Name."),
        ((3, 0.01), 0, f"Criterion met in 2 of 2 scenarios. {NEAR}"),
        ((3,), 0, "Criterion met in the one scenario run. Smallest margin: $3.0 million in S1 Name."),
        ((-3,), 0, "Criterion not met in the one scenario run."),
        ((-3, -1), 0, "Criterion not met in any of 2 scenarios."),
        ((3, -1, 2), 0, "Criterion not met: 2 of 3 scenarios at or above the limit, 1 below (S2 Name); none may be "
         "below the limit."),
        ((3, -1, -2), 0, "Criterion not met: 1 of 3 scenarios at or above the limit, 2 below (S3 Name and S2 Name); "
         "none may be below the limit."),
        ((3, -1, -2, -3, -4), 0, "Criterion not met: 1 of 5 scenarios at or above the limit, 4 below (S5 Name, S4 "
         "Name, S3 Name and 1 more); none may be below the limit."),
        ((3, -1, 2), 1, f"Criterion met: 2 of 3 scenarios at or above the limit, 1 below (S2 Name); {ONE}"),
        ((3, -1, -2), 1, f"Criterion not met: 1 of 3 scenarios at or above the limit, 2 below ({TWO}); {ONE}"),
    ],
)  # fmt: skip
def test_known_verdicts(values, allowed, sentence):
    assert words.verdict(outcomes(*values), allowed, 0.0, MONEY) == sentence


def test_known_verdict_measures_the_margin_from_the_studys_limit():
    said = words.verdict(outcomes(12, 15, limit=10e6), 0, 10e6, MONEY)
    assert said.endswith("Smallest margin: $2.0 million in S1 Name.")


@pytest.mark.parametrize(
    ("endings", "lows", "title"),
    [
        ([1e6, -2e6], [0, -2e6], "Surplus ends below zero in 1 of 2 scenarios"),
        ([-1e6, -2e6], [-1e6, -2e6], "Surplus ends below zero in 2 of 2 scenarios"),
        ([1e6, 2e6], [-1e6, 0], "Surplus ends at or above zero; below on the way in 1 of 2 scenarios"),
        ([1e6, 2e6], [0, 0], "Surplus stays at or above zero in all 2 scenarios"),
        ([1e6], [0], "Surplus stays at or above zero in the one scenario run"),
        ([-1.0, 1e6], [-1.0, 0], "Surplus stays at or above zero in all 2 scenarios"),  # rounds to 0.0
    ],
)
def test_known_titles_of_the_result(endings, lows, title):
    assert words.title_result(endings, lows, "Surplus", MONEY) == title


@pytest.mark.parametrize(
    ("lows", "title"),
    [
        ([0, 1e6], "Surplus is never below zero at a year end in all 2 scenarios"),
        ([0], "Surplus is never below zero at a year end in the one scenario run"),
        ([-1e6, 0, -2e6], "Surplus is below zero at some year end in 2 of 3 scenarios"),
        ([-1e6], "Surplus is below zero at some year end in the one scenario run"),
    ],
)
def test_known_titles_of_surplus_through_time(lows, title):
    assert words.title_surplus(lows, "Surplus", MONEY) == title


@pytest.mark.parametrize(
    ("soon", "can", "par", "title"),
    [
        (35, 80, 100, "35% of par can be called at a stated price within five years"),
        (0, 80, 100, "No par can be called at a stated price within five years"),
        (0, 0, 100, "No security can be called at a stated price"),
        (0, 0, 0, "Maturity and callability"),
    ],
)
def test_known_titles_of_callability(soon, can, par, title):
    assert words.title_callability(soon, can, par) == title


@pytest.mark.parametrize(
    ("net", "title"),
    [
        ([5, 1, -2, -3], "Liability outgo first exceeds the run-off of assets in year 3 (S1)"),
        ([-5], "Liability outgo first exceeds the run-off of assets in year 1 (S1)"),
        ([5, 0], "Run-off of assets covers liability outgo in every year (S1)"),
        ([], "Cash flows of both sides"),
    ],
)
def test_known_titles_of_flows(net, title):
    assert words.title_flows(net, "S1") == title


@pytest.mark.parametrize(
    ("endings", "title"),
    [
        ([0.02, 0.09], "Ten-year yields end between 2.00% and 9.00%"),
        ([0.02, 0.02], "Ten-year yields end at 2.00% in all 2 scenarios"),
        ([-0.005], "Ten-year yields end at −0.50% in the one scenario run"),
        ([], "Treasury yields by scenario"),
    ],
)
def test_known_titles_of_rates(endings, title):
    assert words.title_rates(endings) == title


@pytest.mark.parametrize(
    ("opening", "later", "title"),
    [
        (0.44, [0.01, 0.02], "Callable share falls from 44% of assets to between 1% and 2% by year 10"),
        (0.44, [0.1], "Callable share falls from 44% of assets to 10% by year 10"),
        (0.44, [0.1, 0.5], "Asset mix by scenario"),
        (0.0, [0.0], "Asset mix by scenario"),
        (None, [], "Asset mix by scenario"),
    ],
)
def test_known_titles_of_the_mix(opening, later, title):
    assert words.title_mix(opening, later, 10) == title


@pytest.mark.parametrize(
    ("called", "count", "title"),
    [
        ([("S1", 3), ("S2", 0)], 5, "3 of 5 callable securities are called in S1, 0 in S2"),
        ([("S1", 1), ("S2", 0)], 5, "1 of 5 callable securities is called in S1, 0 in S2"),
        ([("S1", 3), ("S2", 3)], 5, "3 of 5 callable securities are called in all 2 scenarios"),
        ([("S1", 3)], 5, "3 of 5 callable securities are called in the one scenario run"),
        ([("S1", 0), ("S2", 0)], 5, "No callable security is called in any scenario"),
        ([("S1", 0)], 0, "No security can be called at a stated price"),
    ],
)
def test_known_titles_of_the_call_map(called, count, title):
    assert words.title_call_map(called, count) == title


@pytest.mark.parametrize(
    ("called", "par", "title"),
    [
        ([("S1", 30.0), ("S2", 5.0)], 100, "Most par is called in S1: 30% of callable par"),
        ([("S1", 30.0), ("S2", 30.0)], 100, "Par called by year"),
        ([("S1", 0.0), ("S2", 0.0)], 100, "No par is called in any scenario"),
        ([], 100, "No par can be called at a stated price"),
        ([("S1", 0.0)], 0, "No par can be called at a stated price"),
    ],
)
def test_known_titles_of_par_called(called, par, title):
    assert words.title_par_called(called, par) == title


def test_known_direction_of_later_calls():
    said = [words.effect_of_later_calls(v, MONEY) for v in (1e6, -1e6, 0.0, 100.0)]
    assert said == ["raise the result", "lower the result", "no effect seen", "no effect seen"]


def test_known_line_under_a_surplus_panel():
    assert words.low_label(-26.4e6, 5, 42e6, MONEY) == "low −26.4 (y5), end 42.0"
    assert words.low_label(0.0, 0, 42e6, MONEY) == "never below 0, end 42.0"


def test_known_decision_in_words():
    said = words.explained_call("called", "2027-02", "101.37", "101.25")
    assert said == "Call decided in 2027-02: issuer's cost of keeping it 101.37, price plus cost and accrued 101.25."
