"""What `projector value` prints: the columns an actuary looks at first, and the whole portfolio in one line."""

from __future__ import annotations

import numpy as np
import pandas as pd

from projector.run.value_table import ValueResults

HEADS = ("security", "clean", "accrued", "yield to", "worst", "OAS", "duration", "convexity", "option", "next", "never")
UNDER = ("", "per 100", "per 100", "worst %", "date", "bp", "years", "years^2", "per 100", "call", "called %")


def figure(value: float, decimals: int) -> str:
    """A number, or a dash where there is none; no minus before a nought."""
    if not np.isfinite(value):
        return "-"
    text = f"{value:,.{decimals}f}"
    return text.lstrip("-") if float(text.replace(",", "")) == 0.0 else text


def shown_row(row: pd.Series) -> tuple[str, ...]:
    """One security; a star marks a spread that does not come from the price."""
    callable_ = bool(row["next_call_date"])
    return (
        str(row["security_id"]),
        figure(row["clean_price"], 3),
        figure(row["accrued"], 3),
        figure(100.0 * row["yield_to_worst"], 3),
        str(row["worst_date"]),
        figure(row["oas_bp"], 1) + {"price": "", "given": "", "rating_spread": "*"}[row["spread_from"]],
        figure(row["effective_duration"], 2),
        figure(row["effective_convexity"], 1),
        figure(row["option_value"], 2) if callable_ else "-",
        str(row["next_call_date"]) or "-",
        figure(100.0 * row["never_called"], 1) if callable_ else "-",
    )


def weighted(holdings: pd.DataFrame, column: str) -> float:
    """Mean of a column by market value with accrued, over securities that have the figure. Same unit as the column"""
    has = holdings[column].notna() & (holdings["market_value_with_accrued"] > 0.0)
    weight = holdings.loc[has, "market_value_with_accrued"].to_numpy()
    return float((holdings.loc[has, column].to_numpy() * weight).sum() / weight.sum()) if weight.size else float("nan")


def aligned(rows: list[tuple[str, ...]]) -> list[str]:
    """Columns of equal width, the first to the left, the others to the right."""
    widths = [max(len(row[i]) for row in rows) for i in range(len(rows[0]))]
    return [
        "  ".join(cell.ljust(w) if i == 0 else cell.rjust(w) for i, (cell, w) in enumerate(zip(row, widths))).rstrip()
        for row in rows
    ]


def portfolio_line(holdings: pd.DataFrame) -> str:
    """All holdings together, by market value."""
    parts = [
        f"{len(holdings):,} securities, par {holdings['par'].sum():,.2f}, market value with accrued"
        f" {holdings['market_value_with_accrued'].sum():,.2f}",
        f"by market value: yield to worst {100 * weighted(holdings, 'yield_to_worst'):.3f} %",
        f"OAS {weighted(holdings, 'oas_bp'):.1f} bp",
        f"duration {weighted(holdings, 'effective_duration'):.2f} years",
        f"convexity {weighted(holdings, 'effective_convexity'):.1f} years^2",
    ]
    return parts[0] + "\n" + ", ".join(parts[1:])


def value_text(results: ValueResults) -> str:
    """The whole text."""
    study, holdings = results.study, results.holdings
    lines = [f"{study.name}: {study.company}, holdings at {study.valuation_date}, {study.currency}", ""]
    lines += aligned([HEADS, UNDER, *(shown_row(row) for _, row in holdings.iterrows())])
    lines += ["", portfolio_line(holdings), ""]
    lines.append(
        "Yields, accrued and make-whole prices are on exact dates; OAS, durations, option values and call odds on month"
        " ends, the issuer deciding by the study's call model."
    )
    lines.append("Call odds are those of the pricing measure, not a forecast.")
    fallen = int((holdings["spread_from"] == "rating_spread").sum())
    if fallen:
        lines.append(f"* {fallen} priced off their spread: no usable spread gives the price, the class spread is used.")
    lines += [f"Warning: {warning}" for warning in results.warnings]
    return "\n".join(lines)
