"""From a checked study to arrays: everything a block of paths needs, laid out once before any loop."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
import numpy.typing as npt

from projector.balance.holdings import (
    DefaultTerms,
    Holdings,
    LotPaths,
    build_holdings,
    survival_table,
)
from projector.balance.month import Strategy
from projector.balance.purchases import Mix
from projector.bonds.calibration import Calibrated, PriceToday, calibrate
from projector.bonds.call_rules import CallRule, OptimalWithCost
from projector.bonds.mapped import MappedBonds, Terms, map_bonds, security_terms
from projector.bonds.schedule import DatedBond
from projector.bonds.solving import ExerciseModel, MonthSolver
from projector.bonds.spreads import BP, ClassSpreads, SpreadPath, class_spread_table, residual_fade
from projector.liabilities.blocks import LiabilityBlock
from projector.liabilities.streams import build_streams
from projector.rates.curve import log_discount_nodes, monthly_discounts
from projector.rates.paths import PathSet, build_paths
from projector.study.records import Study

Array = npt.NDArray[np.float64]

RULES: dict[str, CallRule] = {"optimal_with_cost": OptimalWithCost()}


@dataclass(frozen=True)
class Prepared:
    """A study laid out: frozen, shared by every block of paths."""

    study: Study
    paths: PathSet
    terms_of: dict[str, Terms]  # by security id
    bonds: MappedBonds
    asset_class: tuple[str, ...]  # by security
    solver: MonthSolver
    calibrated: Calibrated
    rule: CallRule
    holdings: Holdings
    lots: LotPaths
    survival: Array
    terms: DefaultTerms
    strategy: Strategy
    blocks: tuple[LiabilityBlock, ...]

    @cached_property
    def stated_rights(self) -> npt.NDArray[np.bool_]:
        """Securities callable at a stated price, apart from those whose only right is the par call of a make-whole."""
        return stated_rights(self.study, self.bonds)

    @property
    def security_rows(self) -> dict[str, dict[str, Any]]:
        """Rows of the securities table by identifier, dates as `datetime.date`."""
        return {name: t.row for name, t in self.terms_of.items()}

    @cached_property
    def dated_bonds(self) -> tuple[DatedBond, ...]:
        """Every security on its exact dates, in the order of the mapped ones."""
        return tuple(self.terms_of[name].dated() for name in self.bonds.ids)

    @property
    def months(self) -> int:
        return self.study.horizon.months

    @property
    def segment_names(self) -> tuple[str, ...]:
        return tuple(s.name for s in self.study.segments)


def security_column(study: Study, bonds: MappedBonds, name: str) -> npt.NDArray[np.object_]:
    """One column of the securities table in the order of the mapped bonds."""
    return study.tables.securities.set_index("security_id").loc[list(bonds.ids), name].to_numpy()


def stated_rights(study: Study, bonds: MappedBonds) -> npt.NDArray[np.bool_]:
    """Which securities have a right at a stated price that is not the par call of a make-whole. shape (security,)"""
    rights = study.tables.call_rights
    make_whole = set(rights.loc[rights["style"] == "make_whole", "security_id"])
    ahead = rights["last_date"].to_numpy() > np.datetime64(study.valuation_date)
    priced = set(rights.loc[ahead & (rights["style"] != "make_whole").to_numpy(), "security_id"])
    own = np.array([s in priced or s not in make_whole for s in bonds.ids])
    return bonds.with_rights() & own


def start_discount(paths: PathSet, last_month: int) -> Array:
    """P(tau) of the starting curve, one column."""
    nodes = log_discount_nodes(np.ascontiguousarray(paths.yields[:1, :, :1]), paths.reading)
    return monthly_discounts(nodes[0], last_month)


def spreads_and_prices(study: Study, paths: PathSet, bonds: MappedBonds) -> tuple[SpreadPath, Calibrated]:
    """Class, refunding and valuation spreads by month, and the calibration at month 0 (C6)."""
    choice, model = study.spreads, exercise_model(study)
    last = bonds.last_month
    classes = ClassSpreads.from_table(study.tables.class_spreads)
    class_spread = class_spread_table(classes, list(bonds.ratings), bonds.maturity, last)
    follows = choice.refunding == "valuation"
    refunding = class_spread if follows else class_spread + choice.concession_bp * BP
    fade = residual_fade(choice.residual_fade_years, last)
    draft = SpreadPath(class_spread, fade, np.zeros(len(bonds.ids)), refunding)
    price = PriceToday(bonds, draft, model, start_discount(paths, last), follows)
    given = security_column(study, bonds, "spread_bp").astype(np.float64) * BP
    clean = security_column(study, bonds, "clean_price").astype(np.float64)
    result = calibrate(price, clean, given, class_spread[:, 0])
    residual = result.spread - class_spread[:, 0]
    if follows:
        refunding = class_spread + residual[:, None] * fade[None, :]
    return SpreadPath(class_spread, fade, residual, refunding), result


def exercise_model(study: Study) -> ExerciseModel:
    """The issuer's world as the study states it; cost per 100 of par."""
    m = study.call_model
    return ExerciseModel(m.mean_reversion, m.normal_volatility, 100.0 * m.issuer_cost_share_of_par)


def prepare(study: Study, paths: PathSet | None = None) -> Prepared:
    """Lays out a checked study; the path set may be handed in when it was built before."""
    paths = paths or build_paths(study)
    security = security_terms(study.tables)
    bonds = map_bonds(security, study.valuation_date)
    spreads, calibrated = spreads_and_prices(study, paths, bonds)
    terms = DefaultTerms.from_study(study.defaults, study.tables.default_costs)
    mix = Mix.from_study(study.purchases, terms)
    asset_class = tuple(str(c) for c in security_column(study, bonds, "asset_class"))
    segments = tuple(s.name for s in study.segments)
    months = study.horizon.months
    holdings, lots = build_holdings(
        study.tables.lots, bonds, list(asset_class), stated_rights(study, bonds), segments, months
    )
    strategy = Strategy.from_study(
        mix, study.borrowing, study.investment_expense.annual_share_of_statement_value, terms.lag_months
    )
    return Prepared(
        study=study,
        paths=paths,
        terms_of=security,
        bonds=bonds,
        asset_class=asset_class,
        solver=MonthSolver(bonds, spreads, exercise_model(study)),
        calibrated=calibrated,
        rule=RULES[study.call_model.rule],
        holdings=holdings,
        lots=lots,
        survival=survival_table(bonds, terms, max(months, bonds.last_month)),
        terms=terms,
        strategy=strategy,
        blocks=tuple(build_streams(study.tables.liability_streams, paths.ids, months)),
    )
