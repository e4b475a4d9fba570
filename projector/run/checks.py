"""What `check` and every run verify above the study's own floor, and what they list: choices, special cases, sizes."""

from __future__ import annotations

import numpy as np
import pandas as pd

from projector.bonds.calibration import HIGHEST, LEAST_SLOPE, LOWEST
from projector.liabilities.streams import digest_errors
from projector.rates.curve import CurveError, log_discount_nodes
from projector.rates.paths import PathSet
from projector.run.prepare import Prepared
from projector.study.errors import LocatedError, StudyRefused
from projector.study.reading import control_sums
from projector.study.records import Study
from projector.study.streamchecks import check_stream_scenarios

CENT = 0.005
NAMED_AT_MOST, MOST_TO_NAME = 20, 60  # of more securities only the count is told


def curve_stage(study: Study, paths: PathSet) -> None:
    """Every curve of every path must give positive discounts."""
    try:
        log_discount_nodes(paths.yields, paths.reading)
    except CurveError as fault:
        curve = str(study.tables.yield_curve.attrs.get("file", "yield_curve"))
        place = curve if fault.month == 0 else paths.files[fault.path] or "study.toml"
        error = LocatedError(
            code="E450",
            file=place,
            column="rate",
            problem=f"path {paths.ids[fault.path]} ({paths.titles[fault.path]}) cannot be discounted: {fault}",
            remedy="look for a yield in the wrong unit or with too steep a step between tenors, or change the path",
        )
        raise StudyRefused([error]) from fault


def stream_stage(study: Study, paths: PathSet) -> None:
    """Streams against the rate paths: the set first, since a foreign set makes every other fault meaningless."""
    streams = study.tables.liability_streams
    insensitive = study.liabilities.rate_insensitive_blocks
    sensitive = tuple(sorted(set(streams["block"].unique()) - set(insensitive)))
    file = "study.toml"
    errors = digest_errors(study.liabilities.scenario_set_digest, paths.digest(), sensitive, file)
    table = str(streams.attrs.get("file", "liability_streams"))
    errors += check_stream_scenarios(streams, insensitive, paths.ids, study.horizon.months, table)
    if errors:
        raise StudyRefused(errors)


def starting_assets(prepared: Prepared) -> pd.DataFrame:
    """Starting assets and reserves by segment. [currency]: segment, statement_value, accrued, cash, assets, reserve"""
    lots, bonds = prepared.lots, prepared.bonds
    rows = []
    for s, segment in enumerate(prepared.study.segments):
        mine = lots.segment == s
        accrued = lots.par[mine] / 100.0 * bonds.accrued[lots.security[mine], 0]
        statement, due = float(lots.opening_book[mine].sum()), float(accrued.sum())
        reserve = 0.0
        for block in prepared.blocks:
            if block.segment == segment.name:
                reserve += float(block.open(0, 1)[1].reserve_statutory[0])
        rows.append((segment.name, statement, due, segment.cash, statement + due + segment.cash, reserve))
    names = ["segment", "statement_value", "accrued", "cash", "assets", "reserve"]
    return pd.DataFrame(rows, columns=names)


def starting_asset_stage(prepared: Prepared) -> None:
    """Starting assets may not exceed reserves tested (no interest maintenance reserve in this version)."""
    errors = []
    for row in starting_assets(prepared).itertuples():
        excess = row.assets - row.reserve
        if excess > CENT:
            errors.append(
                LocatedError(
                    code="E452",
                    file=str(prepared.study.tables.lots.attrs.get("file", "lots")),
                    column="book_value",
                    problem=(
                        f"starting assets of segment {row.segment} are {row.assets:,.2f} (statement value"
                        f" {row.statement_value:,.2f}, accrued {row.accrued:,.2f}, cash {row.cash:,.2f}), which is"
                        f" {excess:,.2f} above its statutory reserve of {row.reserve:,.2f}"
                    ),
                    remedy="they may not exceed the reserves tested: move that much in lots or cash out of the segment",
                )
            )
    stop = prepared.study.spreads.no_root_fallback == "stop"
    for u, origin in enumerate(prepared.calibrated.origin):
        if stop and origin == "rating_spread":
            errors.append(
                LocatedError(
                    code="E453",
                    file=str(prepared.study.tables.securities.attrs.get("file", "securities")),
                    column="clean_price",
                    value=f"{prepared.calibrated.clean_price[u]:.4f}",
                    problem=(
                        f"no spread between {LOWEST * 1e4:.0f} and {HIGHEST * 1e4:.0f} bp with a slope of at least"
                        f" {LEAST_SLOPE} per 100 bp gives the price of {prepared.bonds.ids[u]}"
                    ),
                    remedy='mend the price or the terms, or state spreads.no_root_fallback = "rating_spread"',
                )
            )
    if errors:
        raise StudyRefused(errors)


def control_frame(prepared: Prepared) -> pd.DataFrame:
    """Ledger against what was read, one row a control total, and the month-0 model against the ledger."""
    study = prepared.study
    cash = {s.name: s.cash for s in study.segments}
    sums = control_sums(study.tables.lots, study.tables.liability_streams, cash)
    assets = starting_assets(prepared).set_index("segment")["assets"]
    sums = sums.assign(starting_assets=assets.reindex(sums.index))
    ledger = study.tables.control_totals
    read = [
        float(sums[item].sum()) if segment == "all" else float(sums.loc[segment, item])
        for item, segment in zip(ledger["item"], ledger["segment"])
    ]
    out = pd.DataFrame({"item": ledger["item"], "segment": ledger["segment"], "ledger": ledger["amount"], "read": read})
    return out.assign(difference=out["read"] - out["ledger"]).reset_index(drop=True)


def named(names: list[str]) -> str:
    """The first names, and how many more there are."""
    more = f", and {len(names) - NAMED_AT_MOST} more" if len(names) > NAMED_AT_MOST else ""
    return ", ".join(names[:NAMED_AT_MOST]) + more if len(names) <= MOST_TO_NAME else ""


def special_cases(prepared: Prepared) -> pd.DataFrame:
    """Counts of the special cases of C6 and others an examiner asks for, with par."""
    bonds, fitted, spreads = prepared.bonds, prepared.calibrated, prepared.solver.spreads
    par = np.zeros(len(bonds.ids))
    np.add.at(par, prepared.lots.security, prepared.lots.par)
    rights = prepared.study.tables.call_rights
    whole = rights[rights["style"] == "make_whole"].groupby("security_id")["make_whole_spread_bp"].max()
    make_whole = np.array([float(whole.get(s, np.nan)) for s in bonds.ids]) * 1e-4
    origin = np.array(fitted.origin)
    stated = np.isfinite(bonds.clean_price).any(axis=1)
    lapsed = rights["last_date"].to_numpy() <= np.datetime64(prepared.study.valuation_date)
    past = set(rights.loc[lapsed, "security_id"])
    above = stated & (fitted.clean_price > bonds.clean_price[:, 1] + prepared.solver.model.cost)
    cases = [
        ("spread calibrated to the stated price", origin == "price", "the clean price is met at month 0"),
        ("spread stated, price modelled", origin == "given", "the study's spread is used as it stands"),
        ("no usable spread: rating spread used", origin == "rating_spread", "no residual; model price differs"),
        (
            "refunding spread below the make-whole spread",
            spreads.refunding[:, 0] < make_whole,
            "an optimal issuer would use the make-whole right; not used here, so the bond stays longer",
        ),
        ("valuation spread below the make-whole spread", fitted.spread < make_whole, "listed for review of the price"),
        (
            "priced above the bar of a right live in month 1",
            above,
            "an optimal issuer would call; the stated price then sets a low or negative spread",
        ),
        ("call announced by the valuation date", bonds.announced, "paid as announced; no right is left"),
        (
            "calls with notice of a month or more",
            stated & (bonds.call_lag > 0),
            "decided so many whole months before the payment, the nearest to the days stated",
        ),
        ("puttable by the holder", bonds.puttable, "put when going on is worth at most the put price; always solved"),
        (
            "repaid in parts before maturity",
            np.array([bool(prepared.terms_of[s].sinking) for s in bonds.ids]),
            "pro rata at 100; where a payment may be doubled the issuer decides each time",
        ),
        (
            "coupon steps",
            np.array([bool(prepared.terms_of[s].steps) for s in bonds.ids]),
            "each rate from its own coupon date on, in payments, accrued interest and exercise",
        ),
        (
            "call rows wholly before the valuation date",
            np.array([s in past for s in bonds.ids]),
            "these rows are ignored, they have lapsed; later rows of the security stand",
        ),
    ]
    return pd.DataFrame(
        [
            {
                "case": case,
                "count": int(mask.sum()),
                "par": float(par[mask].sum()),
                "names": named(sorted(np.array(bonds.ids)[mask])),
                "treatment": text,
            }
            for case, mask, text in cases
        ]
    )
