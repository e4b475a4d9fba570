"""What `check` prints: control totals, choices in force, spreads, special cases, sizes and warnings."""

from __future__ import annotations

import numpy as np

from projector.run.checks import control_frame, special_cases, starting_assets
from projector.run.choices import choices_frame
from projector.run.limits import sizes
from projector.run.mapping_check import LISTED_OVER_BP, mapping_differences
from projector.run.runner import Staged


def money(amount: float) -> str:
    return f"{amount:,.2f}"


def section(title: str, lines: list[str]) -> list[str]:
    return ["", title, *(f"  {line}" for line in lines)]


def spread_lines(staged: Staged) -> list[str]:
    """Spreads calibrated, and what the mapping to month ends does to them."""
    prepared = staged.prepared
    fitted = prepared.calibrated
    by_origin = {o: fitted.origin.count(o) for o in ("price", "given", "rating_spread")}
    spread, gap = fitted.spread * 1e4, np.abs(fitted.model_price - fitted.clean_price).max()
    lines = [
        f"{by_origin['price']} calibrated to the clean price, {by_origin['given']} stated, {by_origin['rating_spread']}"
        " by the rating's spread (fallback)",
        f"valuation spread in bp: lowest {spread.min():.1f}, median {np.median(spread):.1f}, highest"
        f" {spread.max():.1f}",
        f"largest difference between model and stated clean price: {gap:.2e} per 100",
    ]
    differences = mapping_differences(prepared)
    size = differences["difference_bp"].abs()
    lines.append(
        f"mapping to month ends moves the spread of promised payments by {size.median():.2f} bp in the median and"
        f" {size.max():.2f} bp at most"
    )
    over = differences[size > LISTED_OVER_BP].sort_values("security_id")
    lines += [
        f"over {LISTED_OVER_BP:g} bp: {row.security_id}, exact {row.exact_bp:.1f}, mapped {row.mapped_bp:.1f},"
        f" difference {row.difference_bp:+.1f} bp"
        for row in over.itertuples()
    ]
    return lines


def check_text(staged: Staged, folder: str) -> str:
    """The whole text; `folder` as the user named it."""
    prepared = staged.prepared
    study = prepared.study
    lines = [
        f"{study.name}: {study.company}, valuation date {study.valuation_date}, {study.currency}",
        f"input digest {study.input_digest}",
        f"rate path set {prepared.paths.digest()} ({prepared.paths.count} paths)",
    ]
    control = control_frame(prepared)
    lines += section(
        "Control totals: ledger, read, difference",
        [
            f"{r.item} {r.segment}: {money(r.ledger)}, {money(r.read)}, {money(r.difference)}"
            for r in control.itertuples()
        ],
    )
    lines += section(
        "Starting assets and reserves by segment",
        [
            f"{r.segment}: statement value {money(r.statement_value)} + accrued {money(r.accrued)} + cash"
            f" {money(r.cash)} = {money(r.assets)}; reserve {money(r.reserve)}"
            for r in starting_assets(prepared).itertuples()
        ],
    )
    lines += section(
        "Choices in force",
        [
            f"{r.group}: {r.name} = {r.value} [{r.stated}; {r.source}{', ' + r.as_of if r.as_of else ''}]"
            for r in choices_frame(study).itertuples()
        ],
    )
    lines += section("Spreads", spread_lines(staged))
    lines += section(
        "Special cases",
        [
            f"{r.case}: {r.count} of the securities, par {money(r.par)}{': ' + r.names if r.names else ''}"
            f" ({r.treatment})"
            for r in special_cases(prepared).itertuples()
        ],
    )
    lines += section("Sizes", [sizes(study).sentence()])
    lines += section("Warnings", list(staged.warnings) or ["none"])
    lines += ["", f"Checked: nothing was projected. Next: projector run {folder}"]
    return "\n".join(lines)
