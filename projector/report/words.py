"""Sentences that state results, by fixed rules: the verdict, the titles, the lows. Each rule has its own test."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from projector.report.numbers import Money, count_of, fixed, listed, percent

NOT_CALCULATED = "Not applicable, because this version does not calculate it"


@dataclass(frozen=True)
class Outcome:
    """One scenario against the criterion: the measure at its worst date [currency]."""

    name: str
    value: float
    met: bool


def verdict(outcomes: Sequence[Outcome], allowed_below: int, limit: float, money: Money) -> str:
    """The first sentence of the report: met or not, where not, and by how much.

    A study may allow a stated count of scenarios below its limit; the sentence then says how many are.
    """
    below = sorted((o for o in outcomes if not o.met), key=lambda o: o.value)
    total = len(outcomes)
    if not below:
        return f"{_all_met(total)} {_margin(outcomes, limit, money)}"
    if len(below) == total:
        return "Criterion not met in the one scenario run." if total == 1 else _none_met(total)
    where = listed([o.name for o in below])
    met = f"{fixed(total - len(below))} of {count_of(total, 'scenario')}"
    head = "Criterion met" if len(below) <= allowed_below else "Criterion not met"
    allowed = f"{fixed(allowed_below) if allowed_below else 'none'} may be below the limit"
    return f"{head}: {met} at or above the limit, {fixed(len(below))} below ({where}); {allowed}."


def _all_met(total: int) -> str:
    if total == 1:
        return "Criterion met in the one scenario run."
    return f"Criterion met in {fixed(total)} of {count_of(total, 'scenario')}."


def _none_met(total: int) -> str:
    return f"Criterion not met in any of {count_of(total, 'scenario')}."


def _margin(outcomes: Sequence[Outcome], limit: float, money: Money) -> str:
    nearest = min(outcomes, key=lambda o: o.value)
    margin = nearest.value - limit
    close = ", close to the limit" if money.is_zero(margin) else ""
    return f"Smallest margin: {money.phrase(margin)} in {nearest.name}{close}."


def low_label(low: float, year: int, end: float, money: Money) -> str:
    """The line under a panel's name: where the surplus is lowest, and where it ends."""
    if money.is_negative(low):
        return f"low {money.text(low)} (y{year}), end {money.text(end)}"
    return f"never below {fixed(0)}, end {money.text(end)}"


def title_result(endings: Sequence[float], lows: Sequence[float], measure: str, money: Money) -> str:
    """C1: how many scenarios end below zero, and how many only dip on the way."""
    ended = sum(money.is_negative(value) for value in endings)
    dipped = sum(money.is_negative(value) for value in lows)
    total = len(endings)
    if ended:
        return f"{measure} ends below zero in {_some(ended, total)}"
    if dipped:
        return f"{measure} ends at or above zero; below on the way in {_some(dipped, total)}"
    return f"{measure} stays at or above zero in {_every(total)}"


def title_surplus(lows: Sequence[float], measure: str, money: Money) -> str:
    """C6: in how many scenarios some year end is below zero."""
    dipped = sum(money.is_negative(value) for value in lows)
    if not dipped:
        return f"{measure} is never below zero at a year end in {_every(len(lows))}"
    return f"{measure} is below zero at some year end in {_some(dipped, len(lows))}"


def _some(part: int, total: int) -> str:
    return _every(total) if total == 1 else f"{fixed(part)} of {count_of(total, 'scenario')}"


def _any(total: int) -> str:
    return "the one scenario run" if total == 1 else "any scenario"


def _every(total: int) -> str:
    return "the one scenario run" if total == 1 else f"all {count_of(total, 'scenario')}"


def title_callability(within_five: float, can: float, par: float) -> str:
    """C2: the share of par that can be called at a stated price within five years."""
    if not par:
        return "Maturity and callability"
    if not can:
        return "No security can be called at a stated price"
    if not within_five:
        return "No par can be called at a stated price within five years"
    return f"{percent(within_five / par, 0)} of par can be called at a stated price within five years"


def title_flows(net_by_year: Sequence[float], scenario: str) -> str:
    """C4: the first year in which liability outgo exceeds the run-off of the starting holdings."""
    if not net_by_year:
        return "Cash flows of both sides"
    first = next((year for year, net in enumerate(net_by_year, start=1) if net < 0), None)
    if first is None:
        return f"Run-off of assets covers liability outgo in every year ({scenario})"
    return f"Liability outgo first exceeds the run-off of assets in year {fixed(first)} ({scenario})"


def title_rates(endings: Sequence[float]) -> str:
    """C5: where the ten-year yields end."""
    if not endings:
        return "Treasury yields by scenario"
    low, high = percent(min(endings), 2), percent(max(endings), 2)
    if low == high:
        return f"Ten-year yields end at {low} in {_every(len(endings))}"
    return f"Ten-year yields end between {low} and {high}"


def title_mix(opening: float | None, later: Sequence[float], year: int) -> str:
    """C7: what becomes of the share that can be called; neutral when it does not fall everywhere."""
    if opening is None or not later or not all(value < opening for value in later):
        return "Asset mix by scenario"
    low, high = percent(min(later), 0), percent(max(later), 0)
    span = low if low == high else f"between {low} and {high}"
    return f"Callable share falls from {percent(opening, 0)} of assets to {span} by year {fixed(year)}"


def title_call_map(called: Sequence[tuple[str, int]], callable_count: int) -> str:
    """C8: the scenarios with the most and the fewest securities called."""
    if not callable_count or not called:
        return "No security can be called at a stated price"
    most, least = max(called, key=lambda c: c[1]), min(called, key=lambda c: c[1])
    of = f"of {count_of(callable_count, 'callable security', 'callable securities')}"
    are = "is" if most[1] == 1 else "are"
    if not most[1]:
        return f"No callable security is called in {_any(len(called))}"
    if most[1] == least[1]:
        return f"{fixed(most[1])} {of} {are} called in {_every(len(called))}"
    return f"{fixed(most[1])} {of} {are} called in {most[0]}, {fixed(least[1])} in {least[0]}"


def title_par_called(called: Sequence[tuple[str, float]], callable_par: float) -> str:
    """C9: the scenario in which most par is called; neutral when several share the first place."""
    if not callable_par or not called:
        return "No par can be called at a stated price"
    most = max(called, key=lambda c: c[1])
    if not most[1]:
        return f"No par is called in {_any(len(called))}"
    if sum(value == most[1] for _, value in called) > 1:
        return "Par called by year"
    return f"Most par is called in {most[0]}: {percent(most[1] / callable_par, 0)} of callable par"


def explained_call(decision: str, month: str, continuation: str, bar: str) -> str:
    """One decision in words."""
    if decision == "called":
        return (
            f"Call decided in {month}: issuer's cost of keeping it {continuation}, price plus cost and accrued {bar}."
        )
    return f"Kept in {month}: issuer's cost of keeping it {continuation}, price plus cost and accrued {bar}."


def effect_of_later_calls(given_up: float, money: Money) -> str:
    """The direction in which calls later than the model's would move a scenario's result."""
    if money.is_zero(given_up):
        return "no effect seen"
    return "raise the result" if given_up > 0 else "lower the result"
