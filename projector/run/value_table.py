"""Holdings at the valuation date, one row a security, and the two long tables beside them."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt
import pandas as pd

from projector.bonds.call_odds import CallOdds, call_odds
from projector.bonds.refunding import Refunding, refunding_yields
from projector.bonds.sensitivities import (
    KEY_SHIFT,
    SHIFT,
    RateSensitivity,
    rate_sensitivity,
    straight_on_curves,
)
from projector.bonds.yields import accrued_interest
from projector.rates.curve import CurveError
from projector.rates.key_rates import KEY_NAMES, key_rate_shifts, par_yield_at, shifted_discounts, written_out
from projector.run.frames import canonical_digest
from projector.run.prepare import Prepared
from projector.run.runner import Staged, silent, stage
from projector.run.security_table import call_form, lot_sums
from projector.run.street import (
    make_whole_today,
    price_at_required_yield,
    street_redemptions,
    worst_of,
    yield_to,
)
from projector.run.value_columns import value_columns
from projector.study.clock import month_end
from projector.study.errors import LocatedError, StudyRefused
from projector.study.records import Study

Array = npt.NDArray[np.float64]

LOWEST_REQUIRED, HIGHEST_REQUIRED = -0.05, 0.50  # [1/year] a required yield of 5 is meant as 0.05
DAYS_A_YEAR = 365.25
LEAST_ODDS = 5e-13  # a chance below this is rounding of the grid


@dataclass(frozen=True, kw_only=True)
class ValueResults:
    """The tables of `projector value`; columns in `value_columns`."""

    study: Study
    set_digest: str  # of the rate paths
    warnings: tuple[str, ...]
    required_yield: float | None
    holdings: pd.DataFrame
    call_yields: pd.DataFrame
    call_odds: pd.DataFrame
    result_digests: dict[str, str]  # table -> SHA-256 of its canonical rounded content

    def tables(self) -> dict[str, pd.DataFrame]:
        """The frames by name."""
        return {"holdings": self.holdings, "call_yields": self.call_yields, "call_odds": self.call_odds}

    def columns(self) -> dict[str, dict[str, tuple[str, str]]]:
        """Unit and meaning of every column of the tables."""
        return value_columns(self.required_yield is not None)


@dataclass(frozen=True)
class ModelFigures:
    """What the model says of every security, in the order of the mapped bonds."""

    discount: Array  # Treasury P(tau) of month 0, shape (tau,)
    straight: Array  # dirty [per 100]
    sensitivity: RateSensitivity
    refunding: Refunding
    odds: CallOdds


def model_figures(prepared: Prepared, progress: Callable[[str, int, int], None] = silent) -> ModelFigures:
    """Everything that needs the starting curve or a solve."""
    solver, reach = prepared.solver, max(prepared.bonds.last_month + 6, 12)
    yields, reading = written_out(prepared.paths.yields[0, :, 0], prepared.paths.reading)
    shifts = key_rate_shifts(reading.tenor_months, SHIFT, KEY_SHIFT)
    try:
        curves = shifted_discounts(yields, reading, shifts, reach)
    except CurveError as fault:
        raise StudyRefused([shift_refusal(prepared.study, shifts[:, fault.path])]) from fault
    start = np.ascontiguousarray(curves[:, :1])
    units = np.arange(len(prepared.bonds.ids))
    progress("durations", 0, 3)
    sensitivity = rate_sensitivity(solver, units, curves)
    progress("refunding yields", 1, 3)
    refunding = refunding_yields(solver, units, yields, reading)
    progress("call odds", 2, 3)
    odds = call_odds(solver, units, start[:, 0])
    return ModelFigures(
        start[:, 0], straight_on_curves(solver, units, start)[:, 0], sensitivity, refunding, odds
    )  # fmt: skip


def shift_refusal(study: Study, shift: Array) -> LocatedError:
    """The starting curve does not bear a shift that a duration asks for."""
    size = 1e4 * float(shift[np.argmax(np.abs(shift))])
    return LocatedError(
        code="E454",
        file=str(study.tables.yield_curve.attrs.get("file", "yield_curve")),
        column="rate",
        problem=f"the starting curve moved by {size:+.0f} bp leaves no positive discount, so there is no duration",
        remedy="look for a yield in the wrong unit or with too steep a step between tenors",
    )


def refuse_required(required: float | None) -> None:
    """ValueError for a required yield that is no yield a year."""
    if required is None:
        return
    if not (math.isfinite(required) and LOWEST_REQUIRED <= required <= HIGHEST_REQUIRED):
        raise ValueError(
            f"the required yield {required:g} is not between {LOWEST_REQUIRED:g} and {HIGHEST_REQUIRED:g}; it is a"
            " decimal a year, bond-equivalent: 0.05 is 5 %"
        )


def value_tables(
    folder: Path, required_yield: float | None = None, progress: Callable[[str, int, int], None] = silent
) -> ValueResults:
    """Reads and checks a study and values its holdings; projects nothing."""
    refuse_required(required_yield)
    progress("reading and checking", 0, 1)
    return value_staged(stage(folder), required_yield, progress)


def value_staged(
    staged: Staged, required_yield: float | None = None, progress: Callable[[str, int, int], None] = silent
) -> ValueResults:
    """The tables of a study that passed every check."""
    prepared = staged.prepared
    figures = model_figures(prepared, progress)
    holdings, call_yields = security_rows(prepared, figures, required_yield)
    columns = value_columns(required_yield is not None)
    frames = {
        name: frame[list(columns[name])].reset_index(drop=True)
        for name, frame in {
            "holdings": holdings,
            "call_yields": call_yields,
            "call_odds": odds_frame(prepared, figures.odds),
        }.items()
    }
    return ValueResults(
        study=prepared.study,
        set_digest=prepared.paths.digest(),
        warnings=staged.warnings,
        required_yield=required_yield,
        result_digests={name: canonical_digest(name, frame, columns[name]) for name, frame in frames.items()},
        **frames,
    )


def security_rows(
    prepared: Prepared, figures: ModelFigures, required: float | None
) -> tuple[pd.DataFrame, pd.DataFrame]:  # fmt: skip
    """The table of holdings and the yields to every redemption, both in the order of the identifiers."""
    par = lot_sums(prepared)["par"]
    rows, yields = [], []
    for u in sorted(range(len(prepared.bonds.ids)), key=lambda u: prepared.bonds.ids[u]):
        mine = list(prepared.terms_of[prepared.bonds.ids[u]].calls)
        street, listed = street_figures(prepared, u, mine, figures.discount, required)
        rows.append(street | model_row(prepared, figures, u) | {"par": float(par[u])})
        yields += listed
    holdings = pd.DataFrame(rows)
    holdings["market_value"] = holdings["par"] * holdings["clean_price"] / 100.0
    holdings["market_value_with_accrued"] = holdings["par"] * holdings["dirty_price"] / 100.0
    return add_treasury_spreads(holdings, prepared, figures.discount), pd.DataFrame(yields)


def street_figures(
    prepared: Prepared, u: int, rights: list[dict[str, Any]], discount: Array, required: float | None
) -> tuple[dict[str, Any], list[dict[str, Any]]]:
    """One security on exact dates: its part of the row, and the yield to every redemption."""
    name, bond, today = prepared.bonds.ids[u], prepared.dated_bonds[u], prepared.study.valuation_date
    row, clean = prepared.security_rows[name], float(prepared.calibrated.clean_price[u])
    ways = street_redemptions(bond, row, rights, today)
    accrued = accrued_interest(bond, today)
    if prepared.terms_of[name].announced is not None:
        ways = []  # no right is left, and the make-whole price below is of no use to anyone
    worst, maturity = worst_of(bond, prepared.terms_of[name], today, clean), yield_to(bond, today, clean)
    out: dict[str, Any] = {
        "security_id": name,
        **{k: row[k] for k in ("issuer", "asset_class", "rating", "coupon_rate")},
        "maturity_date": bond.maturity.isoformat(),
        "call_form": call_form(prepared.terms_of[name]),
        "clean_price": clean,
        "accrued": accrued,
        "dirty_price": clean + accrued,
        "yield_to_maturity": maturity,
        "yield_to_worst": worst.annual_yield,
        "worst_date": worst.redemption.day.isoformat(),
        "worst_price": worst.redemption.price,
        "next_call_date": ways[0].day.isoformat() if ways else "",
        "next_call_price": ways[0].price if ways else np.nan,
        "make_whole_price": make_whole_today(bond, row, rights, today, discount),
    }
    if required is not None:
        price, day = price_at_required_yield(bond, ways, today, required)
        out |= {
            "required_yield": required, "price_at_required_yield": price, "required_yield_date": day.isoformat(),
        }  # fmt: skip
    listed = [
        {"security_id": name, "redemption": "call", "date": way.day.isoformat(), "price": way.price,
         "yield": yield_to(bond, today, clean, way)}
        for way in ways
    ]  # fmt: skip
    end = {"redemption": "maturity", "date": bond.maturity.isoformat(), "price": 100.0, "yield": maturity}
    return out, [*listed, {"security_id": name, **end}]


def model_row(prepared: Prepared, figures: ModelFigures, u: int) -> dict[str, Any]:
    """One security on mapped months: its part of the row."""
    fitted, accrued = prepared.calibrated, float(prepared.bonds.accrued[u, 0])
    sensitivity = figures.sensitivity
    model, straight = float(sensitivity.value[u]) - accrued, float(figures.straight[u]) - accrued
    return {
        "oas_bp": float(fitted.spread[u]) * 1e4,
        "spread_from": fitted.origin[u],
        "model_price": model,
        "straight_value": straight,
        "option_value": straight - model,
        "effective_duration": float(sensitivity.duration[u]),
        "effective_convexity": float(sensitivity.convexity[u]),
        **{f"key_rate_{name}": float(x) for name, x in zip(KEY_NAMES, sensitivity.key_rate[u])},
        "refunding_yield": float(figures.refunding.present[u]),
        "critical_refunding_yield": float(figures.refunding.critical[u]),
        "never_called": float(figures.odds.never[u]),
    }


def add_treasury_spreads(holdings: pd.DataFrame, prepared: Prepared, discount: Array) -> pd.DataFrame:
    """Adds what each street yield pays over the starting curve's par yield for the same life. [bp]"""
    today = pd.Timestamp(prepared.study.valuation_date)
    out = holdings.copy()
    for name, day in (("maturity", "maturity_date"), ("worst", "worst_date")):
        years = np.array([(pd.Timestamp(d) - today).days / DAYS_A_YEAR for d in holdings[day]])
        out[f"spread_to_treasury_{name}_bp"] = 1e4 * (holdings[f"yield_to_{name}"] - par_yield_at(discount, years))
    return out


def odds_frame(prepared: Prepared, odds: CallOdds) -> pd.DataFrame:
    """Chances of being called by calendar year, of securities with a right ahead, in the order of the identifiers."""
    bonds, today = prepared.bonds, prepared.study.valuation_date
    years = np.array([month_end(m, today).year for m in range(odds.odds.shape[1])])
    firsts = np.flatnonzero(np.diff(years, prepend=-1))
    by_year = np.add.reduceat(odds.odds, firsts, axis=1)
    rows = [
        (bonds.ids[u], int(years[firsts[y]]), float(by_year[u, y]))
        for u in np.flatnonzero(bonds.with_rights() & ~np.isnan(odds.never))
        for y in np.flatnonzero(by_year[u] > LEAST_ODDS)
    ]
    frame = pd.DataFrame(rows, columns=["security_id", "year", "probability"])
    frame = frame.astype({"security_id": object, "year": np.int64, "probability": np.float64})
    return frame.sort_values(["security_id", "year"], kind="stable")
