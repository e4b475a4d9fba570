"""Sales at exact market value, and default with a recovery that comes after its lag."""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from projection_studies import HAND_PURCHASE_BP, HAND_SPREAD_BP, HAND_SURRENDER_MONTH, MONTHS, hand_study

from projector.balance.month import sale_share
from projector.run.block import BlockResult, discounts_of, project
from projector.run.identities import check_identities
from projector.run.prepare import Prepared
from projector.run.runner import stage

LAG = 5
RATE, RECOVERED = 0.03, 0.4


@pytest.fixture(scope="module")
def lagged(tmp_path_factory: pytest.TempPathFactory) -> tuple[Prepared, BlockResult]:
    """The pencil study with B3 defaulting at 3 % a year, 40 % of it recovered five months later; nothing borrowed."""
    study = hand_study(tmp_path_factory.mktemp("lagged") / "lagged")
    study.replace(
        'form = "net_annual_cost"\nrecovery_lag_months = 0', f'form = "rate_recovery_lag"\nrecovery_lag_months = {LAG}'
    )
    study.replace("limit_share_of_statement_assets = 0.5", "limit_share_of_statement_assets = 0")
    study.tables["default_costs"] = [
        {"rating": "A", "annual_rate": "0", "recovery": "0.5"},
        {"rating": "BBB", "annual_rate": str(RATE), "recovery": str(RECOVERED)},
    ]
    prepared = stage(study.write()).prepared
    return prepared, project(prepared, 0, 2)


def test_known_sale_share_meets_the_need_and_no_more() -> None:
    need = np.array([[0.0, 50.0, 200.0, 50.0, -5.0]])
    value = np.array([[100.0, 200.0, 100.0, 0.0, 100.0]])
    np.testing.assert_array_equal(sale_share(need, value), [[0.0, 0.25, 1.0, 0.0, 0.0]])


def worth_by_hand(prepared: Prepared, r: BlockResult, m: int, p: int) -> tuple[float, float]:
    """Market value of the bonds left just before the sale of month m, starting holdings and purchases. [currency]

    Promised payments per bond, on the path's discounts and the stated spread; each purchase of its own.
    """
    discount = discounts_of(prepared, 0, 2)(m)[:, p]

    def worth(left: int, half: float, spread_bp: float) -> float:
        months = [t for t in range(1, left + 1) if (left - t) % 6 == 0]
        return math.fsum(
            (half + (100.0 if t == left else 0.0)) * float(discount[t]) * math.exp(-spread_bp * 1e-4 * t / 12.0)
            for t in months
        )

    kept = float(r.held[m, 0, p])  # all holdings of the segment have the same share left
    alive = 1.0 if p == 0 or m < 12 else 0.0
    b1 = 10_000.0 * alive * worth(120 - m, 4.0, HAND_SPREAD_BP)
    b3 = 6_000.0 * (1.0 - RATE) ** (m / 12.0) * worth(60 - m, 3.0, HAND_SPREAD_BP)
    bought = 0.0
    for q in range(1, m + 1):
        par = -float(r.flows[("bought", "purchase")][q, 0, p])
        for sold in range(q, m):
            # a sale takes one share of everything the segment holds after that month's purchases
            par *= float(r.held[sold + 1, 0, p]) / float(r.held[sold, 0, p])
        coupon = float(prepared.strategy.mix.coupons(discounts_of(prepared, 0, 2)(q))[0, p])
        bought += par / 100.0 * worth(60 - (m - q), 50.0 * coupon, HAND_PURCHASE_BP)
    return kept * (b1 + b3), bought


@pytest.mark.parametrize("p", [0, 1])
def test_known_a_sale_takes_one_share_of_everything_at_exact_market_value(lagged: Any, p: int) -> None:
    prepared, r = lagged
    m = HAND_SURRENDER_MONTH
    start, bought = worth_by_hand(prepared, r, m, p)
    got_start, got_bought = (float(r.flows[(h, "sale")][m, 0, p]) for h in ("start", "bought"))
    share = (got_start + got_bought) / (start + bought)
    assert 0.1 < share < 0.3
    assert got_start == pytest.approx(share * start, rel=1e-11)
    assert got_bought == pytest.approx(share * bought, rel=1e-11)
    # what was needed is what was got, and no cash is left over
    need = -math.fsum(
        float(a[m, 0, p]) for (h, c), a in r.flows.items() if c not in ("sale", "shortfall_drawn")
    ) - float(r.balances["cash"][m - 1, 0, p])  # fmt: skip
    assert got_start + got_bought == pytest.approx(need, rel=1e-12)
    assert r.balances["cash"][m, 0, p] == 0.0
    # the same share of par, statement value and accrued interest leaves
    assert r.held[m + 1, 0, p] == pytest.approx(r.held[m, 0, p] * (1.0 - share), rel=1e-12)
    assert r.par["sold"][m, 0, p] == pytest.approx(
        share * (r.par["close"][m, 0, p] + r.par["sold"][m, 0, p]), rel=1e-12
    )


def test_limit_no_path_sells_or_borrows_without_need(lagged: Any) -> None:
    _, r = lagged
    sold = r.flows[("start", "sale")] + r.flows[("bought", "sale")]
    assert (sold[:, 0] > 0.0).sum() >= 2
    assert ((sold == 0.0) | (r.balances["cash"] == 0.0)).all()
    assert (r.flows[("bought", "purchase")][sold > 0.0] == 0.0).all()
    assert (r.balances["borrowing"] == 0.0).all()


def test_limit_when_everything_is_sold_the_shortfall_account_takes_the_rest(lagged: Any) -> None:
    prepared, _ = lagged
    streams = prepared.blocks[0]
    flows = streams.flows.copy()
    flows[:, 10] *= 400.0  # a month that asks for more than there is
    r = project(replace(prepared, blocks=(replace(streams, flows=flows),)), 0, 2)
    b = r.balances
    assert (b["shortfall"][10] > 1e5).all()
    assert (b["statement_start"][10:] == 0.0).all()
    assert (b["statement_bought"][10] == 0.0).all()
    rate = r.short_rate[11] + 0.006 / 12.0
    np.testing.assert_allclose(
        -r.flows[("segment", "shortfall_interest")][11, 0], b["shortfall"][10, 0] * rate, rtol=1e-13
    )
    assert check_identities(prepared, [r])["holds"].all()


def test_known_defaulted_par_leaves_and_its_recovery_comes_after_the_lag(lagged: Any) -> None:
    _, r = lagged
    monthly = 1.0 - (1.0 - RATE) ** (1.0 / 12.0)
    lost = {m: 600_000.0 * (1.0 - RATE) ** ((m - 1) / 12.0) * monthly for m in range(1, MONTHS + 1)}
    for m in range(1, MONTHS + 1):
        for p in range(2):
            kept = {k: float(r.held[k, 0, p]) for k in (m, max(m - LAG, 1))}
            assert r.par["defaulted"][m, 0, p] == pytest.approx(kept[m] * lost[m], rel=1e-11)
            due = RECOVERED * kept[m - LAG] * lost[m - LAG] if m > LAG else 0.0
            assert r.flows[("start", "recovery")][m, 0, p] == pytest.approx(due, rel=1e-11, abs=1e-12)
    # what has not come yet stands as an asset
    for p in range(2):
        open_ = math.fsum(RECOVERED * float(r.held[m, 0, p]) * lost[m] for m in range(MONTHS - LAG + 1, MONTHS + 1))
        assert r.balances["recoveries"][MONTHS, 0, p] == pytest.approx(open_, rel=1e-11)


def test_limit_par_defaulted_is_recovery_and_loss(lagged: Any) -> None:
    prepared, r = lagged
    received = r.flows[("start", "recovery")].sum(axis=0) + r.balances["recoveries"][MONTHS]
    np.testing.assert_allclose(received, RECOVERED * r.par["defaulted"].sum(axis=0), rtol=1e-11)
    assert check_identities(prepared, [r]).set_index("identity").loc["I3", "holds"]


def test_known_default_cost_is_value_lost_less_recovery_expected(lagged: Any) -> None:
    _, r = lagged
    # month 7 opens just after a coupon: nothing is accrued, and none is lost
    m, par = 7, r.par["defaulted"][7, 0]
    book = 100.0  # B3 stands at par on the coupon date of month 6
    np.testing.assert_allclose(r.balances["default_cost"][m, 0], par / 100.0 * (book - 100.0 * RECOVERED), rtol=1e-10)
    # in month 8 half a per cent is accrued and lost with it, and the effective value is a little below par
    book = 100.0 * 1.03 ** (1 / 6) - 0.5
    par = r.par["defaulted"][8, 0]
    np.testing.assert_allclose(
        r.balances["default_cost"][8, 0], par / 100.0 * (book + 0.5 - 100.0 * RECOVERED), rtol=1e-10
    )


def test_known_monthly_default_compounds_to_the_stated_annual_rate(lagged: Any) -> None:
    prepared, _ = lagged
    u = prepared.bonds.ids.index("B3")
    np.testing.assert_allclose(
        prepared.survival[u, ::12], (1.0 - RATE) ** np.arange(prepared.survival[u, ::12].size), rtol=1e-13
    )
    assert (prepared.survival[prepared.bonds.ids.index("B1")] == 1.0).all()


def test_limit_the_two_forms_agree_without_recovery(tmp_path: Path, hand: Any, hand_block: Any) -> None:
    study = hand_study(tmp_path / "hand")
    study.replace('form = "net_annual_cost"', 'form = "rate_recovery_lag"')
    study.tables["default_costs"] = [
        {"rating": row["rating"], "annual_rate": row["annual_cost"], "recovery": "0"}
        for row in study.tables["default_costs"]
    ]
    other = project(stage(study.write()).prepared, 0, 2)
    for key, array in hand_block.flows.items():
        np.testing.assert_array_equal(other.flows[key], array, err_msg=str(key))
    for name, array in hand_block.balances.items():
        np.testing.assert_array_equal(other.balances[name], array, err_msg=name)
