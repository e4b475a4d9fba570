"""Why one security was or was not called on one path: the run's own decisions, month by month, with what they meant.

The path is projected again by the run's own function (C13), so decisions and the par held are those of the run; what
is added here (yields, the holder's side, rights that a bound had settled) is worked out on the same curves.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cached_property
from pathlib import Path

import numpy as np
import numpy.typing as npt
import pandas as pd

from projector.bonds.decisions import DOUBLE, PUT, SETTLED_BY, DecisionPass
from projector.questions.records import (
    BY_BOUND,
    BY_FINER,
    BY_SOLVE,
    CALLED,
    COLUMNS,
    KEPT,
    MATURED,
    NO_RIGHT,
    CallStory,
)
from projector.questions.refunding import MonthQuestion
from projector.run.block import BlockResult, discounts_of, project
from projector.run.prepare import Prepared
from projector.run.runner import stage
from projector.study.clock import month_end
from projector.study.errors import LocatedError, StudyRefused
from projector.study.names import listed, nearest

Array = npt.NDArray[np.float64]

SAID = {"bound": BY_BOUND, "solve": BY_SOLVE}  # every other way is a finer grid near a tie


def explain(folder: Path, security: str, scenario: str, solve_all: bool = False) -> CallStory:
    """Reads the study, projects the one path, and tells the security's life on it. Raises StudyRefused.

    security   a security of the study
    scenario   identifier (S3), or the path's title
    solve_all  also solve the rights that the bound settled
    """
    prepared = stage(folder).prepared
    unit, path = find_security(prepared, security), find_path(prepared, scenario)
    return tell(prepared, project(prepared, path, path + 1), unit, path, solve_all)


def find_security(prepared: Prepared, name: str) -> int:
    """Index of a security by its identifier."""
    ids = prepared.bonds.ids
    if name in ids:
        return ids.index(name)
    raise StudyRefused([unknown("E601", "security", "security of this study has that name", name, sorted(ids))])


def find_path(prepared: Prepared, name: str) -> int:
    """Index of a path by its identifier, or by a title that only one path has."""
    ids, titles = prepared.paths.ids, prepared.paths.titles
    if name in ids:
        return ids.index(name)
    if titles.count(name) == 1:
        return titles.index(name)
    names = [*ids, *(t for t in titles if titles.count(t) == 1)]
    raise StudyRefused([unknown("E602", "scenario", "scenario of this study has that name", name, names)])


def unknown(code: str, place: str, problem: str, name: str, names: Sequence[str]) -> LocatedError:
    """The error for a name that is not there, with the nearest one."""
    close = nearest(name, names)
    remedy = f"did you mean {close}? Write it as the study does" if close else f"there are {listed(names, 8)}"
    return LocatedError(code=code, file=place, problem=f"no {problem}", value=name, remedy=remedy)


def tell(prepared: Prepared, block: BlockResult, unit: int, path: int, solve_all: bool = False) -> CallStory:
    """The story of one security from a block that holds the path, recorded in detail."""
    life = Life(prepared, block, unit, path, solve_all)
    study, row = prepared.study, prepared.security_rows[prepared.bonds.ids[unit]]
    styles = study.tables.call_rights.loc[study.tables.call_rights["security_id"] == row["security_id"], "style"]
    return CallStory(
        security_id=row["security_id"],
        issuer=str(row["issuer"]),
        coupon_rate=float(row["coupon_rate"]),
        maturity_date=row["maturity_date"],
        scenario=prepared.paths.ids[path],
        scenario_title=prepared.paths.titles[path],
        currency=study.currency,
        valuation_date=study.valuation_date,
        maturity=int(prepared.bonds.maturity[unit]),
        horizon=prepared.months,
        cost=prepared.solver.model.cost,
        stated_price=bool(prepared.stated_rights[unit]),
        make_whole=bool((styles == "make_whole").any()),
        rights=tuple(
            (np.flatnonzero(np.isfinite(prepared.bonds.clean_price[unit])) - prepared.bonds.call_lag[unit]).tolist()
        ),
        announced=bool(prepared.bonds.announced[unit]),
        redemption=float(prepared.bonds.redemption[unit]),
        put=life.put,
        doubled=life.doubled,
        notice=int(prepared.bonds.call_lag[unit]),
        decided=life.decided,
        paid=life.paid,
        months=life.frame(),
    )


@dataclass(frozen=True)
class Life:
    """One security on one path, its decisions as the run took them."""

    prepared: Prepared
    block: BlockResult
    unit: int
    path: int
    solve_all: bool

    @cached_property
    def rows(self) -> pd.DataFrame:
        """The run's rows of decisions, by month."""
        frame = self.block.decisions
        if frame is None or frame.empty:
            return pd.DataFrame(columns=["month", "upper_bound", "continuation", "bar", "by", "share"])
        mine = frame[(frame["unit"] == self.unit) & (frame["path"] == self.path)]
        return mine.sort_values("month").reset_index(drop=True)

    @property
    def decided(self) -> int | None:
        """Month in which the issuer decided to call."""
        used = self.rows.loc[self.rows["share"] > 0.0, "month"]
        return int(used.iloc[0]) if len(used) else None

    @property
    def paid(self) -> int | None:
        """Month in which the call is paid."""
        month = int(self.block.events.months()[self.unit, self.path - self.block.path_lo])
        return month if month >= 0 else None

    @property
    def last(self) -> int:
        """Month of payment, maturity or the horizon, whichever comes first."""
        ends = [int(self.prepared.bonds.maturity[self.unit]), self.prepared.months]
        ends += [] if self.put is None else [self.put[0]]
        return min([*ends, self.paid] if self.paid is not None else ends)

    @property
    def doubled(self) -> tuple[int, ...]:
        """Months whose sinking payment the issuer doubled."""
        events, column = self.block.events, self.path - self.block.path_lo
        mine = range(*events.start[self.unit, column : column + 2])
        return tuple(int(events.month[e]) for e in mine if events.kind[e] == DOUBLE)

    @property
    def put(self) -> tuple[int, int, float] | None:
        """Month in which the holder's put is paid, month of his decision, clean price."""
        events = self.block.events
        mine = range(*events.start[self.unit, self.path - self.block.path_lo :][:2])
        found = [e for e in mine if events.kind[e] == PUT]
        if not found:
            return None
        return int(events.month[found[0]]), int(events.decided[found[0]]), float(events.price[found[0]])

    @cached_property
    def discounts(self) -> Callable[[int], Array]:
        """The path's own curves."""
        return discounts_of(self.prepared, self.path, self.path + 1)

    @cached_property
    def par_held(self) -> Array:
        """Par held before each month's own call: lots, less repaid, defaulted and sold. [currency], (month,)"""
        holdings, column = self.prepared.holdings, self.path - self.block.path_lo
        held = self.block.held[:, :, column]
        total = np.zeros(held.shape[0])
        for k in np.flatnonzero(holdings.security == self.unit):
            total = total + holdings.par[k] * held[:, holdings.group[k]]
        total = total * self.prepared.survival[self.unit, : total.size]
        outstanding = np.ones(total.size)  # of the par of month 0, by its schedule
        upto = min(total.size, self.prepared.bonds.last_month + 1)
        outstanding[:upto] = self.prepared.bonds.outstanding[self.unit, :upto]
        events = self.block.events
        for e in range(*events.start[self.unit, column : column + 2]):
            if events.kind[e] == DOUBLE:
                total[events.month[e] + 1 :] *= 1.0 - events.share[e]
        return np.asarray(total * outstanding)

    def frame(self) -> pd.DataFrame:
        """One row a month, columns as `records.COLUMNS`."""
        decisions = {int(row["month"]): row for row in self.rows.to_dict("records") if row["month"] <= self.last}
        rows = [self.month(m, decisions.get(m)) for m in range(self.last + 1)]
        critical = self.critical_yields(sorted(decisions))
        return pd.DataFrame([row | critical.get(m, {}) for m, row in enumerate(rows)], columns=list(COLUMNS))

    def critical_yields(self, months: list[int]) -> dict[int, dict[str, float]]:
        """Critical yield of some months, empty where no shift makes both sides equal. [1/year]

        Each search begins at the shift of the month before, which is seldom far.
        """
        out, start = {}, 0.0
        for m in months:
            question = self.question(m)
            shift = question.critical_shift(start)
            if shift is not None:
                out[m], start = {"critical_yield": question.yield_at(shift)}, shift
        return out

    def month(self, m: int, decision: dict[str, float] | None) -> dict[str, object]:
        """What there is to say of one month; a value that does not apply is left out."""
        bonds, maturity = self.prepared.bonds, int(self.prepared.bonds.maturity[self.unit])
        par = float(self.par_held[m])
        out: dict[str, object] = {
            "month": m,
            "date": pd.Timestamp(month_end(m, self.prepared.study.valuation_date)),
            "promised": float(bonds.flow[self.unit, m]),
            "accrued": float(bonds.accrued[self.unit, m]),
            "settled_by": NO_RIGHT,
            "decision": MATURED if m == maturity else NO_RIGHT,
            "par_held": par,
        }
        if m < maturity:
            out["refunding_yield"] = self.question(m).yield_at(0.0)
        if decision is None:
            return out
        by = SAID.get(SETTLED_BY[int(decision["by"])], BY_FINER)
        going_on, bar = self.continuation(m, decision), float(decision["bar"])
        units = np.array([self.unit])
        solver, at = self.prepared.solver, self.prepared.solver.groups(m, units)[0][0]
        paid = solver.payment_month(units, m, at.call_lag)
        dirty = float(solver.worth_now(at, units, paid, bonds.tables.price, False, self.discounts(m))[0, 0])
        held = self.holder_value(m)
        return out | {
            "call_price": float(bonds.clean_price[self.unit, paid[0]]),
            "bar": bar,
            "upper_bound": float(decision["upper_bound"]),
            "continuation": going_on,
            "settled_by": by,
            "decision": CALLED if decision["share"] > 0.0 else KEPT,
            "issuer_saving": going_on - bar,
            "holder_value": held,
            "holder_loss": held - dirty,
            "issuer_saving_amount": (going_on - bar) / 100.0 * par,
            "holder_loss_amount": (held - dirty) / 100.0 * par,
        }

    def question(self, m: int) -> MonthQuestion:
        """The month's curve, for shifted ones."""
        paths = self.prepared.paths
        yields = np.ascontiguousarray(paths.yields[m, :, self.path])
        return MonthQuestion(self.prepared.solver, paths.reading, yields, self.unit, m)

    def continuation(self, m: int, decision: dict[str, float]) -> float:
        """As the run solved it; solved here, in the run's own way, where the bound had settled it and all is asked."""
        known = float(decision["continuation"])
        if not (self.solve_all and np.isnan(known)):
            return known
        deciding = DecisionPass(self.prepared.solver, self.prepared.rule, self.prepared.months)
        units, bar = np.array([self.unit]), np.array([[decision["bar"]]])
        at, sure = self.prepared.solver.groups(m, units)[0][0], np.full((1, 1), np.inf)
        return float(deciding.continuations(at, units, sure, bar, -sure, self.discounts(m))[0][0, 0])

    def holder_value(self, m: int) -> float:
        """Holder's value of the bond that is not called this month, ex coupon. [per 100 dirty]"""
        here = np.ones((1, 1), dtype=np.bool_)
        return float(self.prepared.solver.values(m, np.array([self.unit]), self.discounts(m), here)[0, 0])
