"""Securities at the valuation date: price, spreads, rights, book yield and worst date."""

from __future__ import annotations

from datetime import date, timedelta
from typing import Any

import numpy as np
import pandas as pd

from projector.bonds.mapped import Terms
from projector.bonds.yields import accrued_interest
from projector.run.call_table import bond_equivalent_of_growth
from projector.run.mapping_check import mapping_differences
from projector.run.prepare import Prepared
from projector.run.results import COLUMNS
from projector.run.street import worst_of
from projector.study.clock import month_end

STATED = ("american", "bermudan", "european")


def call_form(terms: Terms) -> str:
    """Forms of right, joined; a make-whole security counts its par call with it."""
    row, rights = terms.row, terms.calls
    if terms.announced is not None:
        return "announced"
    forms = [s for s in STATED if any(r["style"] == s for r in rights)]
    if any(r["style"] == "make_whole" for r in rights):
        forms.append("make_whole")
    elif row["par_call_date"] is not None:
        forms.append("american")
    forms += ["put"] if terms.puts else []
    forms += ["doubling"] if any(r["may_double"] for r in terms.sinking) else []
    return "+".join(dict.fromkeys(forms)) or "none"


def securities_frame(prepared: Prepared) -> pd.DataFrame:
    """The securities table in the order of their identifiers."""
    study, bonds, fitted = prepared.study, prepared.bonds, prepared.calibrated
    rows = prepared.security_rows
    sums, mapping = lot_sums(prepared), mapping_differences(prepared)["difference_bp"].to_numpy()
    out = []
    for u, name in enumerate(bonds.ids):
        terms = prepared.terms_of[name]
        row, mine = rows[name], list(terms.calls)
        live = np.flatnonzero(np.isfinite(bonds.clean_price[u]))
        par = float(sums["par"][u])
        clean = float(fitted.clean_price[u])
        make_whole = [float(r["make_whole_spread_bp"]) for r in mine if r["style"] == "make_whole"]
        out.append(
            {
                "security_id": name,
                **{k: row[k] for k in ("issuer", "asset_class", "sector", "rating", "coupon_rate", "coupon_frequency")},
                "maturity_date": row["maturity_date"].isoformat(),
                "call_form": call_form(terms),
                "first_call_date": first_date(row, mine, study.valuation_date) if live.size else "",
                "next_call_price": float(bonds.clean_price[u, live[0]]) if live.size else np.nan,
                "par": par,
                "statement_value": float(sums["book"][u]),
                "market_value": par * clean / 100.0,
                "accrued": par * float(bonds.accrued[u, 0]) / 100.0,
                "accrued_dated": par * accrued_interest(prepared.dated_bonds[u], study.valuation_date) / 100.0,
                "mapping_bp": mapping[u],
                "clean_price": clean,
                "model_price": float(fitted.model_price[u]),
                "valuation_spread_bp": float(fitted.spread[u]) * 1e4,
                "class_spread_bp": float(prepared.solver.spreads.class_spread[u, 0]) * 1e4,
                "refunding_spread_bp": float(prepared.solver.spreads.refunding[u, 0]) * 1e4,
                "spread_from": fitted.origin[u],
                "book_yield": float(sums["yield"][u]),
                "worst_date": month_end(int(sums["worst"][u]), study.valuation_date).isoformat(),
                "yield_to_worst": worst_of(prepared.dated_bonds[u], terms, study.valuation_date, clean).annual_yield,
                "make_whole_spread_bp": make_whole[0] if make_whole else np.nan,
            }
        )
    frame = pd.DataFrame(out).sort_values("security_id").reset_index(drop=True)
    return frame[list(COLUMNS["securities"])]


def first_date(row: dict[str, Any], rights: list[dict[str, Any]], valuation: date) -> str:
    """First date on which a right at a stated price can be used after the valuation date."""
    starts = [
        max(r["first_date"], valuation + timedelta(days=1))
        for r in rights
        if r["style"] != "make_whole" and r["last_date"] > valuation
    ]
    if row["par_call_date"] is not None:
        starts.append(max(row["par_call_date"], valuation + timedelta(days=1)))
    return min(starts).isoformat() if starts else ""


def lot_sums(prepared: Prepared) -> dict[str, np.ndarray]:
    """Par, statement value, and statement-weighted book yield and latest worst month over the lots of a security."""
    lots, count = prepared.lots, len(prepared.bonds.ids)
    par, book, weighted = np.zeros(count), np.zeros(count), np.zeros(count)
    worst = np.zeros(count, dtype=np.int64)
    np.add.at(par, lots.security, lots.par)
    np.add.at(book, lots.security, lots.opening_book)
    np.add.at(weighted, lots.security, lots.opening_book * bond_equivalent_of_growth(lots.growth_at_start))
    np.maximum.at(worst, lots.security, lots.worst_at_start)
    held = np.where(book > 0.0, book, 1.0)
    return {"par": par, "book": book, "yield": weighted / held, "worst": worst}
