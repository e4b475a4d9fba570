"""A study with every term beyond a plain call, on seven paths: decisions re-taken on a dense grid, cash by hand."""

from __future__ import annotations

from datetime import date
from pathlib import Path
from types import SimpleNamespace
from typing import Any

import numpy as np
import pytest
from fine_grid import Security, fine_values
from projection_studies import special_study

import projector
from projector.balance.holdings_kernels import DEFAULT_PAR, ITEMS, PAR, HeldTerms, Left, add_holdings
from projector.balance.market_values import GroupValues, outstanding
from projector.bonds.decisions import CALL, DOUBLE, PUT
from projector.bonds.yields import Redemption, yield_from_clean
from projector.run.block import discounts_of, project
from projector.run.identities import check_identities
from projector.run.prepare import prepare
from projector.run.runner import run_study
from projector.run.street import worst_of
from projector.study.reading import read_study


@pytest.fixture(scope="module")
def special(tmp_path_factory: pytest.TempPathFactory) -> Any:
    folder = special_study(tmp_path_factory.mktemp("special") / "study").write()
    prepared = prepare(read_study(folder)[0])
    return SimpleNamespace(folder=folder, prepared=prepared, block=project(prepared, 0, 7))


def left(special: Any, security: str, path: int) -> list[tuple[int, int, int, float, float]]:
    """What left of a security on a path: kind, month decided, month paid, part, price."""
    events, unit = special.block.events, special.prepared.bonds.ids.index(security)
    span = range(int(events.start[unit, path]), int(events.start[unit, path + 1]))
    whole = [(int(events.kind[e]), int(events.decided[e]), int(events.month[e])) for e in span]
    return [(*w, float(events.part[e]), float(events.price[e])) for w, e in zip(whole, span)]


def as_security(special: Any, unit: int, month: int) -> Security:
    """What is left of a security after a month's payments, as the dense grid takes it."""
    b, cost = special.prepared.bonds, special.prepared.solver.model.cost
    ahead = range(month + 1, int(b.maturity[unit]) + 1)
    return Security(
        flows={m - month: float(b.flow[unit, m]) for m in ahead if b.flow[unit, m]},
        calls={
            m - month: (float(b.dirty_price[unit, m]), float(b.dirty_price[unit, m] + cost * b.outstanding[unit, m]))
            for m in ahead
            if np.isfinite(b.dirty_price[unit, m])
        },
        puts={m - month: float(b.dirty_put[unit, m]) for m in ahead if b.dirty_put[unit, m] > 0.0},
        doubles={
            m - month: (
                float(b.double_share[unit, m]), (100.0 + cost) * float(b.outstanding[unit, m]),
                100.0 * float(b.outstanding[unit, m]),
            )
            for m in ahead
            if b.double_share[unit, m] > 0.0
        },
        notice=int(b.call_lag[unit]), put_notice=int(b.put_lag[unit]),
    )  # fmt: skip


def curve_with(discount: np.ndarray, spread: float) -> Any:
    """P(t) through monthly discounts, with a spread."""
    logs = np.log(discount)
    return lambda t: float(np.exp(np.interp(12.0 * t, np.arange(logs.size), logs) - spread * t))


@pytest.mark.parametrize("security", ["NB", "NA", "PU", "CP", "CN", "SD", "SC", "ST"])
def test_order_decisions_are_those_of_a_dense_grid_that_shares_nothing(special: Any, security: str) -> None:
    """Every decision of two paths, re-taken; near ties are left to the finer grids' own test."""
    p, b = special.prepared, special.prepared.bonds
    unit, solver, compared = b.ids.index(security), special.prepared.solver, 0
    m = solver.model
    for path in (3, 6):
        discounts = discounts_of(p, path, path + 1)
        events = left(special, security, path)
        for month in np.flatnonzero(b.decisions[unit, : p.months + 1]).tolist():
            if any(decided < month and kind != DOUBLE for kind, decided, *_ in events):
                break
            discount = discounts(month)[:, 0]
            held = float(solver.spreads.valuation(np.array([unit]), month)[0])
            priced = [curve_with(discount, spread) for spread in (float(solver.spreads.refunding[unit, month]), held)]
            s = as_security(special, unit, month)
            if s.calls or s.puts or s.doubles:
                cost, value = fine_values(m.mean_reversion, m.normal_volatility, *priced, s, nodes=8.0)
            else:
                cost, value = (sum(a * c(k / 12.0) for k, a in s.flows.items()) for c in priced)
            lag, put_lag = int(b.call_lag[unit]), int(b.put_lag[unit])
            now = {kind for kind, decided, *_ in events if decided == month}

            def worth(amount: float, after: int, curve: Any, s: Security = s) -> float:
                until = sum(a * curve(k / 12.0) for k, a in s.flows.items() if k <= after)
                return float(until + amount * curve(after / 12.0))

            paid = month + lag
            if paid < b.maturity[unit] and np.isfinite(b.dirty_price[unit, paid]):
                bar = worth(float(b.dirty_price[unit, paid] + m.cost * b.outstanding[unit, paid]), lag, priced[0])
                if abs(cost - bar) > 0.01:
                    assert (CALL in now) == (cost > bar), (security, path, month)
                    compared += 1
            if b.double_share[unit, month] > 0.0 and CALL not in now:
                bar = (100.0 + m.cost) * float(b.outstanding[unit, month])
                if abs(cost - bar) > 0.01:
                    assert (DOUBLE in now) == (cost > bar), (security, path, month)
                    compared += 1
            paid = month + put_lag
            if paid < b.maturity[unit] and b.dirty_put[unit, paid] > 0.0 and CALL not in now:
                price = worth(float(b.dirty_put[unit, paid]), put_lag, priced[1])
                if abs(value - price) > 0.01:
                    assert (PUT in now) == (value < price), (security, path, month)
                    compared += 1
    assert compared >= 3


def test_order_notice_falls_so_many_months_before_the_payment(special: Any) -> None:
    """30 days are one month, 60 two, 15 and 5 none."""
    seen = {}
    for security, lag in (("NB", 1), ("NA", 2), ("CN", 1), ("SC", 0), ("ST", 0)):
        calls = [e for path in range(7) for e in left(special, security, path) if e[0] == CALL]
        assert calls, security
        assert {paid - decided for _, decided, paid, *_ in calls} == {lag}
        seen[security] = len(calls)
    puts = [e for path in range(7) for e in left(special, "CN", path) if e[0] == PUT]
    assert {paid - decided for _, decided, paid, *_ in puts} == {2}


def test_known_cash_of_an_announced_call_and_of_a_sinking_fund(special: Any) -> None:
    """Per 100: AN is repaid at 101.5 with five months of a 7 % coupon; SC repays a tenth each June."""
    b = special.prepared.bonds
    an, sc = b.ids.index("AN"), b.ids.index("SC")
    assert b.maturity[an] == 5
    assert b.flow[an, :7] == pytest.approx([0.0, 0.0, 0.0, 0.0, 0.0, 101.5 + 3.5 * 5 / 6, 0.0])
    assert b.flow[an].sum() == b.flow[an, 5]
    assert b.flow[sc, [6, 12, 18, 24, 90]] == pytest.approx(
        [2.875 + 10.0, 2.875 * 0.9, 2.875 * 0.9 + 10.0, 2.875 * 0.8, 2.875 * 0.3 + 30.0]
    )
    assert b.outstanding[sc, [0, 6, 18, 89, 90]] == pytest.approx([1.0, 0.9, 0.8, 0.3, 0.0])
    assert b.coupon[b.ids.index("ST"), [6, 12, 18, 36, 42]] == pytest.approx([2.0, 2.0, 2.75, 2.75, 3.25])


def test_limit_what_would_have_been_announced_by_the_valuation_date_cannot_be_called(special: Any) -> None:
    """NA may be called from January on, with notice of two months: the first payment is that of March."""
    b = special.prepared.bonds
    assert np.flatnonzero(np.isfinite(b.clean_price[b.ids.index("NA")]))[0] == 3


def test_order_what_is_announced_is_not_valued_as_callable(special: Any) -> None:
    """From the month of its decision on, a called security has no share left to be solved."""
    unit, path = special.prepared.bonds.ids.index("NA"), 6
    ((_, decided, paid, *_),) = left(special, "NA", path)
    shares = [float(outstanding(special.block.events, m)[unit, path]) for m in (decided - 1, decided, paid)]
    assert shares == [1.0, 0.0, 0.0]


def test_order_a_stepped_bond_at_a_discount_has_its_worst_yield_before_the_steps(special: Any) -> None:
    """Bought under par it yields less when called early: the least of the yields to every date the schedule allows."""
    bond = special.prepared.terms_of["ST"].dated()
    today, clean = special.prepared.study.valuation_date, 99.0
    ways = [Redemption(c.payment, 100.0) for c in bond.coupons if date(2023, 6, 30) <= c.payment < bond.maturity]
    each = [yield_from_clean(bond, today, clean, "street", way) for way in (*ways, None)]
    assert worst_of(bond, special.prepared.terms_of["ST"], today, clean).annual_yield == pytest.approx(
        min(each), abs=1e-9
    )
    assert min(each) < each[-1] - 1e-4


def test_known_par_that_defaults_is_par_not_yet_repaid(special: Any) -> None:
    """SC repays a tenth in month 6: until then all its par may default, after it nine tenths."""
    p, block = special.prepared, special.block
    unit = p.bonds.ids.index("SC")
    survival, left_of = p.survival[unit], p.bonds.outstanding[unit]
    b = p.bonds
    tables = (x[:, : p.months + 1].copy() for x in (b.coupon, b.accrued, b.principal, b.outstanding))
    held = HeldTerms(b.maturity, p.survival, np.zeros(len(b.ids)), *tables, b.redemption, b.announced)
    out = np.zeros((ITEMS, p.months + 1, 1, 1))
    n = int(np.flatnonzero(p.holdings.security == unit)[0])
    none = np.zeros((len(p.bonds.ids), 2), dtype=np.int64)
    events = block.events
    add_holdings(
        p.months, np.array([unit]), np.zeros(1, np.int64), np.array([100.0]), held, p.holdings.book[[n]],
        p.holdings.accretion[[n]], Left(events.month, events.part, events.kind, events.price, none), out,
    )  # fmt: skip
    months = np.arange(1, p.months + 1)
    expected = 100.0 * (survival[months - 1] - survival[months]) * left_of[months - 1]
    assert out[DEFAULT_PAR, 1:, 0, 0] == pytest.approx(expected, rel=1e-12)
    assert out[PAR, 6, 0, 0] == pytest.approx(90.0 * survival[6])


def test_known_what_is_announced_is_valued_as_certain(special: Any) -> None:
    """Between decision and payment the value is that of payments until then, by hand from the month's curve."""
    p, b = special.prepared, special.prepared.bonds
    unit, path = b.ids.index("NA"), 6
    ((kind, decided, paid, part, price),) = left(special, "NA", path)
    assert (kind, paid - decided, part) == (CALL, 2, 1.0)
    values = GroupValues(p.holdings, p.solver, p.survival, special.block.events)
    for month in (decided, decided + 1):
        discount = discounts_of(p, 0, 7)(month)
        wanted = np.ones((1, 7), dtype=np.bool_)
        found = values.announced(month, np.array([unit]), discount, wanted)[0, path]
        spread = float(p.solver.spreads.valuation(np.array([unit]), month)[0])
        months = np.arange(month + 1, paid + 1)
        due = b.coupon[unit, months] + np.where(months == paid, price + b.accrued[unit, paid], 0.0)
        tau = months - month
        assert found == pytest.approx(
            float((due * discount[tau, path] * np.exp(-spread * tau / 12.0)).sum()), rel=1e-12
        )


def test_order_identities_hold_and_every_share_is_accounted_for(special: Any) -> None:
    frame = check_identities(special.prepared, [special.block])
    assert frame["holds"].all()
    events = special.block.events
    cell = np.repeat(np.arange(events.start.shape[0] * 7), np.diff(events.start, axis=1).ravel())
    total = np.bincount(cell, weights=events.part, minlength=cell.max() + 1)
    assert (total <= 1.0 + 1e-12).all()
    assert (events.part > 0.0).all()  # what is gone is asked no more
    assert {CALL, PUT, DOUBLE} == set(events.kind.tolist())


def test_order_the_bits_do_not_depend_on_blocks_or_the_order_of_rows(special: Any, tmp_path: Path) -> None:
    whole = special.block
    for lo, hi in ((0, 1), (1, 4), (4, 7)):
        part = project(special.prepared, lo, hi)
        for key, amount in part.flows.items():
            assert amount.tobytes() == np.ascontiguousarray(whole.flows[key][:, :, lo:hi]).tobytes(), key
        for month, value in part.market_start.items():
            assert value.tobytes() == np.ascontiguousarray(whole.market_start[month][:, lo:hi]).tobytes()
    shuffled = special_study(tmp_path / "shuffled")
    for table in ("securities", "lots", "put_rights", "sinking_payments", "coupon_steps", "announced_calls"):
        shuffled.tables[table] = shuffled.tables[table][::-1]
    again = project(prepare(read_study(shuffled.write())[0]), 0, 7)
    assert again.balances["cash"].tobytes() == whole.balances["cash"].tobytes()


def test_order_the_report_says_what_left_otherwise(special: Any) -> None:
    results = run_study(special.folder, threads=1)
    assert set(results.puts["security_id"]) == {"PU", "CP", "CN"}
    assert results.puts["received"].to_numpy() == pytest.approx(
        (results.puts["par_put"] * results.puts["price"] / 100.0).to_numpy(), rel=1e-12
    )
    announced = results.calls[results.calls["right"] == "announced before"]
    assert set(announced["security_id"]) == {"AN", "AM"}
    page = projector.render_report(results)
    assert "Par that left by other rights" in page
    assert ">nan<" not in page
