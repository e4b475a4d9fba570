"""Every choice in force: stated in the study or a numerical default, with its source (for `check` and the report)."""

from __future__ import annotations

import pandas as pd

from projector.bonds.decisions import SECOND_BAND, SECOND_BAND_OTHER, THIRD_BAND
from projector.bonds.exercise.step_operator import GRID_FINE, GRID_FINER, GRID_HALF_YEAR, GRID_MONTHLY, Grid
from projector.run.results import COLUMNS
from projector.study.records import Origin, PathSource, Study

NUMERICAL = "numerical default of the program"


def percent(value: float, digits: int = 2) -> str:
    """A decimal rate in percent."""
    return f"{round(100.0 * value, digits) + 0.0:.{digits}f}%"


def bp(value: float) -> str:
    """Basis points without needless decimals."""
    return f"{value:g} bp"


def path_words(source: PathSource) -> str:
    """One path source in words, with each reading chosen."""
    if source.kind == "seven_deterministic":
        floor = {
            "none": "no floor",
            "shift": "floor: no shift below minus half the starting five-year yield",
            "every_tenor": "floor: every tenor at half its own start",
        }[str(source.floor)]
        within = {"linear": "changes evenly within the year", "year_end_steps": "changes in steps at year ends"}
        back = {
            "cut": "sixth path: unfloored path cut at the floor",
            "from_floor": "sixth path: rises one point a year from the floor after year 5",
        }
        return (
            f"seven deterministic paths; {floor}; {within[str(source.within_year)]}; {back[str(source.recovery)]};"
            " immediate changes apply from month 1; shifts are parallel"
        )
    if source.kind == "shift_table":
        how = "evenly within the year" if source.within_year == "linear" else "in steps at year ends"
        return f"shifts by year and tenor from a table, applied {how}"
    if source.kind == "history":
        return f"historical replay from a table, {source.replay} of past yields"
    return "imported set"


def grid_words(grid: Grid) -> str:
    return f"grid spacing {grid.kappa:g}, band {grid.band_width:g}, range {grid.range_width:g} standard deviations"


def stated_choices(study: Study) -> list[tuple[str, str, str, Origin | None]]:
    """Group, name, value and origin of everything the study states."""
    call, spread, default, buy = study.call_model, study.spreads, study.defaults, study.purchases
    out: list[tuple[str, str, str, Origin | None]] = [
        ("Call model", "Call rule", call.rule.replace("_", " "), call.origin),
        ("Call model", "Mean reversion", f"{percent(call.mean_reversion)} a year", call.origin),
        ("Call model", "Normal volatility", f"{bp(1e4 * call.normal_volatility)} a year", call.origin),
        ("Call model", "Issuer's cost", f"{percent(call.issuer_cost_share_of_par)} of par", call.origin),
        ("Spreads", "Refunding spread", spread.refunding.replace("_", " "), spread.origin),
        ("Spreads", "New-issue concession", bp(spread.concession_bp), spread.origin),
        (
            "Spreads",
            "Residual spread fades over",
            f"{spread.residual_fade_years:g} years" if spread.residual_fade_years else "kept for life",
            spread.origin,
        ),
        ("Spreads", "Where no spread gives the price", spread.no_root_fallback.replace("_", " "), spread.origin),
        ("Defaults", "Form", default.form.replace("_", " "), default.origin),
        ("Defaults", "Recovery lag", f"{default.recovery_lag_months} months", default.origin),
        ("Purchases", "Share of cash invested", percent(buy.share_of_cash_invested, 0), buy.origin),
    ]
    out += [
        (
            "Purchases",
            f"Class: {c.name}",
            f"{percent(c.weight, 1)} of each purchase, rating {c.rating}, {c.term_years} years, {bp(c.spread_bp)} over"
            " Treasury",
            buy.origin,
        )
        for c in buy.classes
    ]
    borrow, expense, horizon = study.borrowing, study.investment_expense, study.horizon
    out += [
        ("Borrowing", "Rate", f"one-month Treasury + {bp(borrow.spread_bp)}", borrow.origin),
        ("Borrowing", "Limit", f"{percent(borrow.limit_share_of_statement_assets)} of statement assets", borrow.origin),
        (
            "Investment expense",
            "Annual rate",
            f"{percent(expense.annual_share_of_statement_value, 3)} of opening statement value",
            expense.origin,
        ),
        ("Horizon", "Months", f"{horizon.months}", horizon.origin),
        ("Horizon", "Assets left at the horizon", horizon.asset_close_out.replace("_", " "), horizon.origin),
        ("Horizon", "Liability left at the horizon", horizon.liability_close_out.replace("_", " "), horizon.origin),
        (
            "Discounting",
            "Constant added to one-month rates",
            bp(study.discounting.npv_constant_bp),
            study.discounting.origin,
        ),
        ("Rates", "Rate basis of quoted yields", f"{study.rates.rate_basis}, bond-equivalent", study.rates.origin),
    ]
    out += [("Rates", f"Paths {i + 1}", path_words(s), study.rates.origin) for i, s in enumerate(study.rates.paths)]
    blocks = ", ".join(study.liabilities.rate_insensitive_blocks) or "none"
    out.append(("Liabilities", "Blocks declared insensitive to rates", blocks, study.liabilities.origin))
    zero = "0, not modelled in this version"
    out += [
        ("Not modelled", "Interest maintenance reserve", zero, None),
        ("Not modelled", "Asset valuation reserve", zero, None),
        ("Not modelled", "Federal income tax", zero, None),
    ]
    return out


def numerical_choices(study: Study) -> list[tuple[str, str, str, str]]:
    """Name, value, stated or default, and source of the numerical choices."""
    stated = "default" if "interpolation" in study.numerics.defaulted else "stated"
    curve = "Fritsch and Butland 1984, monotone cubic" if study.numerics.interpolation == "monotone" else "linear"
    return [
        ("Interpolation between quoted tenors", study.numerics.interpolation, stated, curve),
        ("Half-year and longer grids", grid_words(GRID_HALF_YEAR), "default", NUMERICAL),
        ("Monthly grids", grid_words(GRID_MONTHLY), "default", NUMERICAL),
        ("Prices at the valuation date", grid_words(GRID_FINE), "default", NUMERICAL),
        (
            "Decisions re-solved near the bar",
            f"within {SECOND_BAND_OTHER:g} per 100 ({SECOND_BAND[1]:g} on monthly grids) on the finer grid, within"
            f" {THIRD_BAND:g} again ({grid_words(GRID_FINER)})",
            "default",
            NUMERICAL,
        ),
        (
            "Regular coupons",
            "rate over frequency whatever the day count, which serves odd first coupons and accrued interest on dates",
            "default",
            "convention of the program",
        ),
        (
            "Within a month",
            "order of events of convention C2; notice in whole months, the nearest",
            "default",
            "convention of the program",
        ),
    ]


def choices_frame(study: Study) -> pd.DataFrame:
    """The choices table."""
    rows = []
    for group, name, value, origin in stated_choices(study):
        rows.append(
            (group, name, value, "stated", origin.source, origin.as_of, origin.rationale)
            if origin
            else (group, name, value, "stated", "study.toml", "", "")
        )
    rows += [("Numerical", name, value, how, source, "", "") for name, value, how, source in numerical_choices(study)]
    return pd.DataFrame(rows, columns=list(COLUMNS["choices"]))
