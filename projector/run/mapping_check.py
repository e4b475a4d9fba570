"""What mapping to month ends does to a spread (C1): promised payments on exact dates against mapped months."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
import pandas as pd

from projector.bonds.yields import accrued_interest
from projector.run.prepare import Prepared, start_discount

Array = npt.NDArray[np.float64]

LISTED_OVER_BP = 5.0
DAYS_A_YEAR = 365.25
MOST_STEPS = 100


def spread_of(times: Array, amounts: Array, log_discount: Array, price: float, start: float = -0.5) -> float:
    """Continuously compounded spread at which payments are worth a dirty price, by Newton. [1/year]; nan: not found

    The value is falling and convex in the spread, so Newton from the left of the root never passes it, and from the
    right it passes it once; `start` near the root saves steps.
    """
    base, spread = amounts * np.exp(log_discount), start
    for _ in range(MOST_STEPS):
        value = base * np.exp(-spread * times)
        miss = float(value.sum()) - price
        if abs(miss) < 1e-10:
            return spread
        spread += miss / float((value * times).sum())
    return float("nan")


def mapping_differences(prepared: Prepared) -> pd.DataFrame:
    """security_id, exact_bp, mapped_bp, difference_bp: spreads of the promised payments to maturity at the same price.

    Rights are left out on both sides, so that only the mapping differs. The exact side discounts on days / 365.25 and
    accrues by the bond's own day count; the mapped side on months / 12 with mapped accrued interest.
    """
    bonds, valuation = prepared.bonds, prepared.study.valuation_date
    discount = np.log(start_discount(prepared.paths, bonds.last_month + 2)[:, 0])
    months = np.arange(discount.size) / 12.0
    out = []
    for u, (name, bond) in enumerate(zip(bonds.ids, prepared.dated_bonds)):
        ahead = [(c.payment, c.amount) for c in bond.coupons if c.payment > valuation] + [(bond.maturity, 100.0)]
        times = np.array([(day - valuation).days / DAYS_A_YEAR for day, _ in ahead])
        amounts = np.array([amount for _, amount in ahead])
        clean = float(prepared.calibrated.clean_price[u])
        near = float(prepared.calibrated.spread[u])
        dirty = clean + accrued_interest(bond, valuation)
        exact = spread_of(times, amounts, np.interp(times, months, discount), dirty, near)
        at = np.flatnonzero(bonds.flow[u])
        mapped = spread_of(at / 12.0, bonds.flow[u, at], discount[at], clean + float(bonds.accrued[u, 0]), near)
        out.append((name, 1e4 * exact, 1e4 * mapped, 1e4 * (mapped - exact)))
    return pd.DataFrame(out, columns=["security_id", "exact_bp", "mapped_bp", "difference_bp"])
