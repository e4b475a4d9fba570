"""Sums that must hold on every run, recomputed from recorded flows and balances by code the engine does not share.

A failed identity stops the run: no report is written. Tolerance: |left - right| <= 1e-9 x (sum of absolute terms) +
1e-6 currency units, for each month, segment and path.
"""

from __future__ import annotations

from collections.abc import Iterable
from datetime import date
from typing import Any

import numpy as np
import numpy.typing as npt
import pandas as pd

from projector.bonds.schedule import DatedBond
from projector.liabilities.streams import SuppliedStream
from projector.run.block import BlockResult
from projector.run.prepare import Prepared
from projector.study.clock import month_of
from projector.study.errors import IdentityFailed

Array = npt.NDArray[np.float64]

RELATIVE, ABSOLUTE = 1e-9, 1e-6
RULE = "1e-9 x sum of absolute terms + 0.000001"


class Sums:
    """Residuals of one identity: the terms must add up to nothing."""

    def __init__(self, code: str, name: str) -> None:
        self.code, self.name = code, name
        self.worst, self.where, self.count, self.holds = -1.0, "", 0, True

    def add(self, terms: Iterable[Array], labels: tuple[tuple[str, ...], ...], first_month: int) -> None:
        """Compares at every cell; labels are the scenario and segment names of the last two axes reversed."""
        parts = list(terms)
        residual, size = np.zeros(parts[0].shape), np.zeros(parts[0].shape)
        with np.errstate(invalid="ignore"):  # infinities that cancel are caught below as not finite
            for term in parts:
                residual = residual + term
                size = size + np.abs(term)
        gap, allowed = np.abs(residual), RELATIVE * size + ABSOLUTE
        self.count += gap.size
        self.holds = self.holds and bool((np.isfinite(gap) & (gap <= allowed)).all())
        if gap.size == 0:
            return
        # path first, so that of equal differences the same one is named however the paths are cut into blocks
        order = np.moveaxis(np.where(np.isfinite(gap), gap, np.inf), -1, 0)
        at = np.unravel_index(int(np.argmax(order)), order.shape)
        if order[at] > self.worst:
            self.worst = float(order[at])
            cell = (*at[1:], at[0])
            names = [axis[i] for axis, i in zip(labels, cell[1:])]
            self.where = ", ".join([*reversed(names), f"month {int(cell[0]) + first_month}"])

    def gap_text(self) -> str:
        """The worst difference in words."""
        return f"{self.worst:.6g}" if np.isfinite(self.worst) else "that is not a finite number"

    def row(self) -> dict[str, object]:
        return {
            "identity": self.code, "name": self.name, "checked": self.count, "tolerance": RULE,
            "worst_difference": max(self.worst, 0.0), "where": self.where, "holds": self.holds,
        }  # fmt: skip


def flow_total(result: BlockResult, without: tuple[str, ...] = ()) -> Array:
    """All flows into cash but those named. [month, segment, path]"""
    total = np.zeros_like(result.runoff)
    for (_, category), amount in result.flows.items():
        if category not in without:
            total = total + amount
    return total


def gross_flows(result: BlockResult) -> Array:
    """Sum of the absolute values of all flows. [month, segment, path]"""
    total = np.zeros_like(result.runoff)
    for amount in result.flows.values():
        total = total + np.abs(amount)
    return total


def cash_terms(r: BlockResult) -> list[Array]:
    """I1: opening cash + every flow = closing cash."""
    cash = r.balances["cash"]
    return [cash[:-1], *(a[1:] for a in r.flows.values()), -cash[1:]]


def par_terms(r: BlockResult) -> list[Array]:
    """I2: opening par - redeemed - called - sold - defaulted + bought = closing par."""
    p = r.par
    return [p["close"][:-1], -p["scheduled"][1:], -p["called"][1:], -p["put"][1:], -p["sold"][1:], -p["defaulted"][1:],
            p["bought"][1:], -p["close"][1:]]  # fmt: skip


def default_terms(r: BlockResult) -> list[Array]:
    """I3: recoveries expected so far = received + still due; no other cash comes from defaulted par."""
    received = r.flows[("start", "recovery")] + r.flows[("bought", "recovery")]
    return [np.cumsum(r.book["recoverable"], axis=0), -np.cumsum(received, axis=0), -r.balances["recoveries"]]


def book_terms(r: BlockResult) -> list[Array]:
    """I4: opening statement value + purchases + accretion - redeemed, called, defaulted, sold at book = closing."""
    close = r.balances["statement_start"] + r.balances["statement_bought"]
    b = r.book
    return [close[:-1], -r.flows[("bought", "purchase")][1:], b["accretion"][1:], -b["principal"][1:], -b["called"][1:],
            -b["put"][1:], -b["defaulted"][1:], -b["sold"][1:], -close[1:]]  # fmt: skip


def value_terms(r: BlockResult) -> list[Array]:
    """I9: opening cash + discounted flows other than interest on cash = discounted closing cash, at cash rates."""
    flows, gross = flow_total(r, without=("cash_interest",)), gross_flows(r)
    discount, total, size = np.ones(r.short_rate.shape[1]), np.zeros(flows.shape[1:]), np.zeros(flows.shape[1:])
    for m in range(1, flows.shape[0]):  # month by month: a sum over the array would depend on its shape
        discount = discount / (1.0 + r.short_rate[m])
        total = total + flows[m] * discount
        size = size + gross[m] * discount
    opening, closing = r.balances["cash"][0], r.balances["cash"][-1] * discount
    # the size of all discounted flows enters the tolerance through a pair that cancels
    return [opening[None], total[None], -closing[None], size[None], -size[None]]


def surplus_terms(r: BlockResult) -> list[Array]:
    """I10: change of statement surplus = income + gains - outgo - change of reserve, from income pieces alone."""
    b, f = r.balances, r.flows
    assets = b["statement_start"] + b["statement_bought"] + b["accrued"] + b["recoveries"] + b["cash"]
    surplus = assets - b["borrowing"] - b["shortfall"] - b["reserve"]
    call_gain = f[("start", "call_par")] - r.book["called"] + f[("start", "put")] - r.book["put"]
    sale_gain = f[("start", "sale")] + f[("bought", "sale")] - r.book["sold"] - r.book["sold_accrued"]
    own = ("investment_expense", "cash_interest", "borrowing_interest", "shortfall_interest")
    movements = ("borrowed", "repaid", "shortfall_drawn", "shortfall_repaid")
    liability = [a for (h, c), a in f.items() if h == "segment" and c not in own + movements]
    income = [b["interest_earned"], r.book["accretion"], f[("start", "call_premium")], call_gain, sale_gain,
              -b["default_cost"], *(f[("segment", c)] for c in own), *liability]  # fmt: skip
    return [surplus[:-1], -surplus[1:], *(t[1:] for t in income), -(b["reserve"][1:] - b["reserve"][:-1])]


def promised_coupons(bond: DatedBond, announced: dict[str, Any] | None, valuation: date) -> float:
    """Coupons after the valuation date by the dated schedule, up to a call already announced. [per 100]

    What such a call pays between two coupons counts mapped months of the coupon then earned (C1).
    """
    coupons = [c for c in bond.coupons if c.payment > valuation]
    if announced is None:
        return sum(c.amount for c in coupons)
    end = month_of(announced["payment_date"], valuation)
    total = sum(c.amount for c in coupons if month_of(c.payment, valuation) <= end)
    broken = [c for c in coupons if month_of(c.start, valuation) < end < month_of(c.payment, valuation)]
    for c in broken:
        start, paid = month_of(c.start, valuation), month_of(c.payment, valuation)
        total += c.amount * (end - start) / (paid - start)
    return total


def coupon_sums(prepared: Prepared) -> Sums:
    """I5: what each security pays on mapped months is what its dated schedule promises after the valuation date."""
    check = Sums("I5", "coupons over life: mapped months = dated schedule, per 100 of par")
    valuation = prepared.study.valuation_date
    promised = np.array(
        [
            promised_coupons(bond, prepared.terms_of[name].announced, valuation)
            for name, bond in zip(prepared.bonds.ids, prepared.dated_bonds)
        ]
    )
    check.add([prepared.bonds.coupon.sum(axis=1)[None, :], -promised[None, :]], (prepared.bonds.ids,), 0)
    return check


def reserve_sums(prepared: Prepared, blocks: list[BlockResult]) -> Sums:
    """I11: the reserve of each segment is the sum of what its streams supply, path by path and month by month."""
    check = Sums("I11", "reserve: balances = supplied streams, added up by segment")
    rows = prepared.study.tables.liability_streams
    rows = rows[(rows["item"] == "reserve_statutory") & (rows["month"] <= prepared.months)]
    month, amount = rows["month"].to_numpy(), rows["amount"].to_numpy(dtype=np.float64)
    segment = rows["segment"].map({s: i for i, s in enumerate(prepared.segment_names)}).to_numpy()
    scenario = rows["scenario"].to_numpy()
    for block in blocks:
        ids = prepared.paths.ids[block.path_lo : block.path_hi]
        supplied = np.zeros_like(block.balances["reserve"])
        for p, name in enumerate(ids):
            mine = (scenario == name) | (scenario == "all")
            np.add.at(supplied[:, :, p], (month[mine], segment[mine]), amount[mine])
        check.add([block.balances["reserve"], -supplied], (prepared.segment_names, ids), 0)
    return check


FORMS = (
    ("I1", "cash: opening + flows = closing", cash_terms, 1),
    ("I2", "par: opening - redeemed - called - sold - defaulted + bought = closing", par_terms, 1),
    ("I3", "default: recoveries expected = received + still due", default_terms, 0),
    ("I4", "statement value: opening + purchases + accretion - disposals at book = closing", book_terms, 1),
    ("I9", "value: opening cash + discounted flows = discounted closing cash", value_terms, 0),
    ("I10", "surplus: change = income and gains - outgo - change of reserve", surplus_terms, 1),
)


def check_identities(prepared: Prepared, blocks: list[BlockResult]) -> pd.DataFrame:
    """One row per identity over every block. Raises IdentityFailed, naming where, when one does not hold."""
    checks = []
    segments = prepared.segment_names
    for code, name, terms, first_month in FORMS:
        check = Sums(code, name)
        for block in blocks:
            check.add(terms(block), (segments, prepared.paths.ids[block.path_lo : block.path_hi]), first_month)
        checks.append(check)
    checks.insert(4, coupon_sums(prepared))
    if all(isinstance(b, SuppliedStream) for b in prepared.blocks):
        checks.append(reserve_sums(prepared, blocks))
    failed = [c for c in checks if not c.holds]
    if failed:
        lines = [f"{c.code} {c.name}: difference {c.gap_text()} at {c.where}, allowed {RULE}" for c in failed]
        raise IdentityFailed("sums that must hold do not; no report was written:\n" + "\n".join(lines))
    return pd.DataFrame([c.row() for c in checks])
