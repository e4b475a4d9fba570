"""What mapping to month ends does to a spread (C1): promised payments on exact dates against mapped months."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
import pandas as pd

from projector.bonds.schedule import coupons_between
from projector.bonds.yields import Redemption, accrued_interest, redemption_amount
from projector.run.prepare import Prepared, start_discount

Array = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

LISTED_OVER_BP = 5.0
DAYS_A_YEAR = 365.25
MOST_STEPS = 100


def spreads_of(times: Array, amounts: Array, log_discount: Array, owner: IntArray, price: Array, start: Array) -> Array:
    """Continuously compounded spread at which each owner's payments are worth its dirty price, by Newton. [1/year]

    times, amounts, log_discount  [payment], the payments of one owner side by side, every owner with at least one
    owner                         [payment] 0, 1, 2, ... in order
    price, start                  [owner] per 100; where Newton begins

    The value is falling and convex in the spread, so Newton from the left of the root never passes it, and from the
    right it passes it once. nan where it is not found.
    """
    firsts = np.flatnonzero(np.diff(owner, prepend=-1))
    base, spread = amounts * np.exp(log_discount), start.copy()
    root = np.full(price.size, np.nan)
    for _ in range(MOST_STEPS):
        value = base * np.exp(-spread[owner] * times)
        miss = np.add.reduceat(value, firsts) - price
        met = np.isnan(root) & (np.abs(miss) < 1e-10)
        root[met] = spread[met]
        open_ = np.isnan(root)
        if not open_.any():
            break
        spread[open_] += (miss / np.add.reduceat(value * times, firsts))[open_]
    return root


def mapping_differences(prepared: Prepared) -> pd.DataFrame:
    """security_id, exact_bp, mapped_bp, difference_bp: spreads of the promised payments to maturity at the same price.

    Rights are left out on both sides, so that only the mapping differs. The exact side discounts on days / 365.25 and
    accrues by the bond's own day count; the mapped side on months / 12 with mapped accrued interest.
    """
    bonds, valuation = prepared.bonds, prepared.study.valuation_date
    discount = np.log(start_discount(prepared.paths, bonds.last_month + 2)[:, 0])
    months = np.arange(discount.size) / 12.0
    clean, near = prepared.calibrated.clean_price, prepared.calibrated.spread
    days, amounts, owner = [], [], []
    for u, (name, bond) in enumerate(zip(bonds.ids, prepared.dated_bonds)):
        called = prepared.terms_of[name].announced
        last = Redemption(called["payment_date"], called["price"]) if called else Redemption(bond.maturity, 100.0)
        ahead = coupons_between(bond, valuation, last.day)
        days += [(c.payment - valuation).days for c in ahead] + [(last.day - valuation).days]
        amounts += [c.amount + c.principal for c in ahead] + [redemption_amount(bond, last)]
        owner += [u] * (len(ahead) + 1)
    times, of = np.array(days) / DAYS_A_YEAR, np.array(owner)
    accrued = np.array([accrued_interest(bond, valuation) for bond in prepared.dated_bonds])
    exact = spreads_of(times, np.array(amounts), np.interp(times, months, discount), of, clean + accrued, near)
    of, at = np.nonzero(bonds.flow)
    mapped = spreads_of(at / 12.0, bonds.flow[of, at], discount[at], of, clean + bonds.accrued[:, 0], near)
    return pd.DataFrame(
        {
            "security_id": bonds.ids,
            "exact_bp": 1e4 * exact,
            "mapped_bp": 1e4 * mapped,
            "difference_bp": 1e4 * (mapped - exact),
        }
    )
