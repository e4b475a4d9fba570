"""The study's criterion in each of its forms."""

from __future__ import annotations

from datetime import date

import numpy as np
import pytest

from projector.measures.criterion import criterion_met, criterion_values, scenarios_met
from projector.study.records import Criterion

STATEMENT = np.array([[5.0, -3.0, 8.0, 1.0], [-1.0, 2.0, 6.0, 1.0], [4.0, 2.0, 7.0, -2.0]])  # [year end, scenario]
MARKET = STATEMENT - 6.5


def criterion(**terms: object) -> Criterion:
    """Statement surplus not below 0 at any year end in any scenario, unless the terms say otherwise."""
    usual: dict[str, object] = {
        "sentence": "words", "fixed_on": date(2023, 1, 20), "measure": "statement_surplus", "dates": "every_year_end",
        "scenarios_allowed_below": 0, "limit": 0.0,
    }  # fmt: skip
    return Criterion(**(usual | terms))


@pytest.mark.parametrize(
    ("terms", "values", "met"),
    [
        ({}, [-1.0, -3.0, 6.0, -2.0], [False, False, True, False]),
        ({"dates": "end"}, [4.0, 2.0, 7.0, -2.0], [True, True, True, False]),
        ({"measure": "market_surplus"}, [-7.5, -9.5, -0.5, -8.5], [False] * 4),
        ({"measure": "market_surplus", "dates": "end"}, [-2.5, -4.5, 0.5, -8.5], [False, False, True, False]),
        ({"limit": -2.0}, [-1.0, -3.0, 6.0, -2.0], [True, False, True, True]),
        ({"limit": 3.0, "dates": "end"}, [4.0, 2.0, 7.0, -2.0], [True, False, True, False]),
    ],
)
def test_known_measure_dates_and_limit(terms: dict[str, object], values: list[float], met: list[bool]) -> None:
    rule = criterion(**terms)
    found = criterion_values(rule, STATEMENT, MARKET)
    assert found.tolist() == values
    assert scenarios_met(rule, found).tolist() == met


@pytest.mark.parametrize(("allowed", "met"), [(0, False), (2, False), (3, True), (4, True)])
def test_known_scenarios_allowed_below(allowed: int, met: bool) -> None:
    rule = criterion(scenarios_allowed_below=allowed)
    assert criterion_met(rule, criterion_values(rule, STATEMENT, MARKET)) is met


def test_limit_exactly_the_limit_is_met_and_a_cent_below_is_not() -> None:
    rule = criterion(limit=100.0)
    assert scenarios_met(rule, np.array([100.0, 100.0 - 1e-9, 99.99])).tolist() == [True, True, False]


def test_limit_what_is_not_a_number_does_not_meet_anything() -> None:
    assert not scenarios_met(criterion(), np.array([np.nan]))[0]
    assert not criterion_met(criterion(), np.array([np.nan, 1.0]))
