"""What was asked, frozen: every choice of a study after the door has checked it.

No actuarial choice has a default here. A record that carries an assumption also carries where it came from
(`Origin`), which the report prints. Rates are decimals per year, prices per 100 of par, amounts in currency
units, spreads in basis points where the name ends in `_bp`.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from datetime import date

import pandas as pd


@dataclass(frozen=True, kw_only=True)
class Origin:
    """Where an assumption came from: printed beside it in the report."""

    source: str
    as_of: str
    rationale: str


@dataclass(frozen=True, kw_only=True)
class Segment:
    """A block of business with its own assets: cash at the valuation date [currency]."""

    name: str
    title: str
    cash: float


@dataclass(frozen=True, kw_only=True)
class CallModel:
    """How the issuer decides: Hull-White one-factor, refunding cost as a share of par."""

    rule: str  # "optimal_with_cost"
    mean_reversion: float  # [1/year]
    normal_volatility: float  # [1/year, absolute], 0.01 = 100 bp a year
    issuer_cost_share_of_par: float  # [-], 0.005 = 0.5 % of par
    origin: Origin


@dataclass(frozen=True, kw_only=True)
class Spreads:
    """The three spreads of C6, all continuously compounded over the path's Treasury discounts."""

    refunding: str  # "class_plus_concession" or "valuation"
    concession_bp: float  # new-issue concession on top of the class spread [bp]; 0 when refunding = "valuation"
    residual_fade_years: float  # years over which the security's residual fades to nothing; 0 = kept
    no_root_fallback: str  # "rating_spread" or "stop"
    origin: Origin


@dataclass(frozen=True, kw_only=True)
class Defaults:
    """One of two forms, never both: a net annual cost without recovery, or rate, recovery and lag."""

    form: str  # "net_annual_cost" or "rate_recovery_lag"
    recovery_lag_months: int  # 0 for net_annual_cost
    origin: Origin


@dataclass(frozen=True, kw_only=True)
class PurchaseClass:
    """A non-callable bullet bought at par on the path's curve plus its spread."""

    name: str
    rating: str
    term_years: int
    spread_bp: float  # continuously compounded over Treasury [bp]
    weight: float  # share of each purchase [-]


@dataclass(frozen=True, kw_only=True)
class Purchases:
    """What positive cash buys after debts are repaid: a fixed mix, the rest stays in cash."""

    share_of_cash_invested: float  # [-], 0 = cash only
    classes: tuple[PurchaseClass, ...]
    origin: Origin


@dataclass(frozen=True, kw_only=True)
class Borrowing:
    """Short-term borrowing before anything is sold."""

    spread_bp: float  # over the path's one-month Treasury [bp, simple]; never negative: no profit from borrowing
    limit_share_of_statement_assets: float  # of the segment's statement assets in that month [-]
    origin: Origin


@dataclass(frozen=True, kw_only=True)
class InvestmentExpense:
    """Charged monthly on the opening statement value of bonds."""

    annual_share_of_statement_value: float  # [1/year]
    origin: Origin


@dataclass(frozen=True, kw_only=True)
class Criterion:
    """When the test counts as met; fixed before the results were seen."""

    sentence: str  # the study's own words, quoted in the report
    fixed_on: date
    measure: str  # "statement_surplus" or "market_surplus"
    dates: str  # "end" or "every_year_end"
    scenarios_allowed_below: int
    limit: float  # [currency]


@dataclass(frozen=True, kw_only=True)
class Horizon:
    """How far the projection runs and what the remainder is worth."""

    months: int  # a multiple of 12
    asset_close_out: str  # "market_value" or "statement_value"
    liability_close_out: str  # "statutory_reserve" or "surrender_value"
    origin: Origin


@dataclass(frozen=True, kw_only=True)
class Discounting:
    """The constant added to the path's one-month rates in the NPV gap."""

    npv_constant_bp: float
    origin: Origin


@dataclass(frozen=True, kw_only=True)
class PathSource:
    """One source of rate paths, in the order written in the study.

    kind: "seven_deterministic" | "shift_table" | "history" | "imported"
    """

    kind: str
    file: str | None = None
    floor: str | None = None  # seven: "none", "shift", "every_tenor"
    within_year: str | None = None  # seven and shift_table: "year_end_steps", "linear"
    recovery: str | None = None  # seven: "cut", "from_floor"
    replay: str | None = None  # history: "changes", "levels"


@dataclass(frozen=True, kw_only=True)
class Rates:
    """The starting curve's reading and the paths asked for."""

    rate_basis: str  # "par" or "zero"
    paths: tuple[PathSource, ...]
    origin: Origin


@dataclass(frozen=True, kw_only=True)
class Liabilities:
    """How the supplied streams are bound to the rate paths."""

    scenario_set_digest: str | None  # 64 hex digits; None only when every block is declared insensitive
    rate_insensitive_blocks: tuple[str, ...]
    origin: Origin


@dataclass(frozen=True, kw_only=True)
class Numerics:
    """Numerical choices: these have defaults, each listed by `check` and the report with its source."""

    interpolation: str = "monotone"  # between quoted tenors: "monotone" or "linear"
    block_paths: int = 256
    defaulted: tuple[str, ...] = ()  # names of the choices the study did not state


@dataclass(frozen=True, kw_only=True)
class Texts:
    """Words of the study that the report prints as the study's own."""

    prior_additional_reserve: str = ""  # last year's amount in words, empty when there is none
    reliances: tuple[str, ...] = ()
    notes: tuple[str, ...] = ()
    law_and_manual: str = ""
    materiality: str = ""


@dataclass(frozen=True, kw_only=True)
class Tables:
    """The checked tables, typed, in canonical order. Columns and units: `projector.study.columns`."""

    securities: pd.DataFrame
    lots: pd.DataFrame
    call_rights: pd.DataFrame
    yield_curve: pd.DataFrame
    class_spreads: pd.DataFrame
    default_costs: pd.DataFrame
    liability_streams: pd.DataFrame
    control_totals: pd.DataFrame
    put_rights: pd.DataFrame = field(default_factory=pd.DataFrame)  # this and the next: empty when not named
    sinking_payments: pd.DataFrame = field(default_factory=pd.DataFrame)
    coupon_steps: pd.DataFrame = field(default_factory=pd.DataFrame)
    announced_calls: pd.DataFrame = field(default_factory=pd.DataFrame)
    rate_tables: dict[str, pd.DataFrame] = field(default_factory=dict)  # by the file name in the path source


@dataclass(frozen=True, kw_only=True)
class FileDigest:
    """SHA-256 of one input file as it lay on disk."""

    name: str
    sha256: str
    bytes: int


@dataclass(frozen=True, kw_only=True)
class Study:
    """All inputs of one valuation."""

    name: str
    company: str
    business: str
    valuation_date: date
    information_date: date
    currency: str
    data_status: str  # "invented", "draft" or "final"
    responsible_actuary: str
    segments: tuple[Segment, ...]
    call_model: CallModel
    spreads: Spreads
    defaults: Defaults
    purchases: Purchases
    borrowing: Borrowing
    investment_expense: InvestmentExpense
    criterion: Criterion
    horizon: Horizon
    discounting: Discounting
    rates: Rates
    liabilities: Liabilities
    numerics: Numerics
    texts: Texts
    tables: Tables
    input_digest: str  # SHA-256 over checked tables and choices (C15)
    files: tuple[FileDigest, ...]
