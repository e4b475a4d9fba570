"""study.toml as a typed form: every key, its unit in words, its range or choices. No actuarial choice has a default.

The description of each key is also the comment beside it in a new study and the text of the JSON Schema.
"""

from __future__ import annotations

from datetime import date
from typing import Annotated, Any, Literal

from pydantic import AfterValidator, BaseModel, ConfigDict, Field
from pydantic_core import PydanticCustomError

from projector.study.columns import RATINGS
from projector.study.names import WORDS_AT_MOST, text_fault

SEGMENTS_AT_MOST = 200


def _printable(text: str, at_most: int, *, lines: bool) -> str:
    problem = text_fault(text, at_most, lines=lines) or (None if text else "is empty")
    if problem:
        raise PydanticCustomError("text_fault", "{problem}", {"problem": problem})
    return text


def _line(text: str) -> str:
    return _printable(text, 200, lines=False)


def _words(text: str) -> str:
    return _printable(text.strip("\n"), WORDS_AT_MOST, lines=True)


Line = Annotated[str, AfterValidator(_line)]
Words = Annotated[str, AfterValidator(_words)]
Name = Annotated[str, Field(pattern=r"^[a-z][a-z0-9_]*$", max_length=60)]
Money = Annotated[float, Field(ge=-1e13, le=1e13)]


class Form(BaseModel):
    """What every section shares: no unknown key, no silent change of type, finite numbers, frozen."""

    model_config = ConfigDict(extra="forbid", strict=True, frozen=True, allow_inf_nan=False)


class Sourced(Form):
    """A section that carries an assumption says where it came from."""

    source: Line = Field(description="where the assumption came from: document, table, page")
    as_of: date = Field(description="date of the source")
    rationale: Words = Field(description="why it is right for this business")


class StudySection(Form):
    name: Line = Field(description="name of the study, in the report's title")
    company: Line = Field(description="company")
    business: Line = Field(description="the business tested")
    valuation_date: date = Field(description="a month end, such as 2022-12-31")
    information_date: date = Field(description="what was known until this day entered; on or after the valuation date")
    currency: Annotated[str, Field(pattern=r"^[A-Z]{3}$", description="ISO 4217, such as USD")]
    data_status: Literal["invented", "draft", "final"] = Field(description="invented, draft or final")
    responsible_actuary: Line = Field(description="who answers for the assumptions")


class TablesSection(Form):
    securities: str = Field(description="terms and prices of securities")
    lots: str = Field(description="what is held, by segment")
    call_rights: str = Field(description="call rights; the table may be empty")
    yield_curve: str = Field(description="Treasury yields at the valuation date")
    class_spreads: str = Field(description="spreads by rating and life")
    default_costs: str = Field(description="default costs by rating")
    liability_streams: str = Field(description="liability flows by block, scenario, month")
    control_totals: str = Field(description="totals from the ledger")
    put_rights: str | None = Field(default=None, description="holders' rights to put")
    sinking_payments: str | None = Field(default=None, description="scheduled repayments before maturity")
    coupon_steps: str | None = Field(default=None, description="coupon rates that change on a date")
    announced_calls: str | None = Field(default=None, description="calls announced and not yet paid")


class SegmentSection(Form):
    name: Name = Field(description="lower-case name used in the tables")
    title: Line = Field(description="name in the report")
    cash: float = Field(ge=0, le=1e13, description="cash at the valuation date [currency]")


class CallModelSection(Sourced):
    rule: Literal["optimal_with_cost"] = Field(
        description="optimal_with_cost: calls when waiting costs the issuer more"
    )
    mean_reversion: float = Field(ge=-0.05, le=0.5, description="of the short rate [1/year], -0.05 to 0.5")
    normal_volatility: float = Field(ge=0, le=0.05, description="0.01 is 100 bp a year [1/year], 0 to 0.05")
    issuer_cost_share_of_par: float = Field(
        ge=0, le=0.05, description="cost of calling, 0.005 is 0.5 % of par, 0 to 0.05"
    )


class SpreadsSection(Sourced):
    refunding: Literal["class_plus_concession", "valuation"] = Field(
        description="spread at which the issuer refunds: class_plus_concession, or valuation (the security's own)"
    )
    concession_bp: float = Field(ge=-100, le=500, description="on top of the class spread [bp]; 0 with valuation")
    residual_fade_years: float = Field(
        ge=0, le=60, description="years over which a security's residual fades; 0 keeps it"
    )
    no_root_fallback: Literal["rating_spread", "stop"] = Field(
        description="when a price has no spread: rating_spread or stop"
    )


class DefaultsSection(Sourced):
    form: Literal["net_annual_cost", "rate_recovery_lag"] = Field(
        description="net_annual_cost (par decays, no recovery) or rate_recovery_lag"
    )
    recovery_lag_months: int = Field(ge=0, le=60, description="months to recovery; 0 with net_annual_cost")


class PurchaseClassSection(Form):
    name: Line = Field(description="name of the class")
    # the choices are the columns' own list, which a type checker cannot read as literals
    rating: Literal[RATINGS] = Field(description="rating such as A")  # type: ignore[valid-type]
    term_years: int = Field(ge=1, le=30, description="whole years to maturity")
    spread_bp: float = Field(ge=-200, le=2000, description="over Treasury, continuously compounded [bp]")
    weight: float = Field(gt=0, le=1, description="share of each purchase; the weights sum to 1")


class PurchasesSection(Sourced):
    share_of_cash_invested: float = Field(ge=0, le=1, description="of positive cash; 0 is cash only, then no classes")
    classes: list[PurchaseClassSection] = Field(default_factory=list, description="bullets bought at par")


class BorrowingSection(Sourced):
    spread_bp: float = Field(ge=0, le=2000, description="over the one-month Treasury [bp], never negative")
    limit_share_of_statement_assets: float = Field(ge=0, le=1, description="0.03 is 3 % of the segment's assets")


class InvestmentExpenseSection(Sourced):
    annual_share_of_statement_value: float = Field(
        ge=0, le=0.02, description="0.0012 is 12 bp a year [1/year], 0 to 0.02"
    )


class MaintenanceReserveSection(Form):
    interest_maintenance_reserve: Money = Field(description="[currency]; this version needs 0")
    asset_valuation_reserve: Money = Field(description="[currency]; this version needs 0")


class TaxSection(Form):
    rate: float = Field(ge=0, le=1, description="0.21 is 21 %; this version needs 0")


class CriterionSection(Form):
    sentence: Words = Field(description="when the test counts as met, in your words; the report quotes it")
    fixed_on: date = Field(description="the day it was fixed, before results were seen")
    measure: Literal["statement_surplus", "market_surplus"] = Field(description="statement_surplus or market_surplus")
    dates: Literal["every_year_end", "end"] = Field(description="every_year_end or end")
    scenarios_allowed_below: int = Field(ge=0, le=1_000_000, description="scenarios that may fall below the limit")
    limit: Money = Field(description="smallest surplus that counts as met [currency]")


class HorizonSection(Sourced):
    months: int = Field(ge=12, le=600, multiple_of=12, description="a multiple of 12, 12 to 600")
    asset_close_out: Literal["market_value", "statement_value"] = Field(description="market_value or statement_value")
    liability_close_out: Literal["statutory_reserve", "surrender_value"] = Field(
        description="statutory_reserve or surrender_value"
    )


class DiscountingSection(Sourced):
    npv_constant_bp: float = Field(
        ge=-500, le=1000, description="added to one-month rates in the NPV gap [bp]; 0 allowed"
    )


class SevenPaths(Form):
    kind: Literal["seven_deterministic"]
    floor: Literal["none", "shift", "every_tenor"] = Field(description="none, shift or every_tenor")
    within_year: Literal["year_end_steps", "linear"] = Field(description="year_end_steps or linear")
    recovery: Literal["cut", "from_floor"] = Field(description="cut or from_floor")


class ShiftPaths(Form):
    kind: Literal["shift_table"]
    file: str = Field(description="table of shifts")
    within_year: Literal["year_end_steps", "linear"] = Field(description="year_end_steps or linear")


class HistoryPaths(Form):
    kind: Literal["history"]
    file: str = Field(description="table of past yields")
    replay: Literal["changes", "levels"] = Field(description="changes or levels")


class ImportedPaths(Form):
    kind: Literal["imported"]
    file: str = Field(description="table of finished paths")


Paths = Annotated[SevenPaths | ShiftPaths | HistoryPaths | ImportedPaths, Field(discriminator="kind")]


class RatesSection(Sourced):
    rate_basis: Literal["par", "zero"] = Field(description="par or zero, bond-equivalent; under 6 months simple")
    paths: list[Paths] = Field(min_length=1, description="sources of rate paths, in the order of the report")


class LiabilitiesSection(Sourced):
    scenario_set_digest: Annotated[str, Field(pattern=r"^[0-9a-f]{64}$")] | None = Field(
        default=None, description="digest of the scenario set the streams were made for, 64 hex digits"
    )
    rate_insensitive_blocks: list[Line] = Field(description="blocks whose one stream serves every path")


class TextsSection(Form):
    prior_additional_reserve: Words = Field(default="", description="last year's, in words")
    reliances: list[Words] = Field(default_factory=list, description="on whom and what you rely")
    notes: list[Words] = Field(default_factory=list, description="notes printed in the report")
    law_and_manual: Words = Field(default="", description="law and manual sections that apply")
    materiality: Words = Field(default="", description="the materiality standard")


class NumericsSection(Form):
    interpolation: Literal["monotone", "linear"] = Field(default="monotone", description="between quoted tenors")
    block_paths: int = Field(default=256, ge=64, le=65_536, multiple_of=64, description="paths worked on together")


class StudyForm(Form):
    """The whole of study.toml."""

    study: StudySection = Field(description="What this study is.")
    tables: TablesSection = Field(description="Files under the study folder: CSV, Parquet or XLSX.")
    segments: list[SegmentSection] = Field(
        min_length=1, max_length=SEGMENTS_AT_MOST, description="Blocks of business with their own assets."
    )
    call_model: CallModelSection = Field(description="How issuers decide to call.")
    spreads: SpreadsSection = Field(description="Refunding spread and what a price tells beyond its class.")
    defaults: DefaultsSection = Field(description="Default cost.")
    purchases: PurchasesSection = Field(description="What positive cash buys.")
    borrowing: BorrowingSection = Field(description="Borrowing before anything is sold.")
    investment_expense: InvestmentExpenseSection = Field(description="Expense of investing.")
    maintenance_reserve: MaintenanceReserveSection = Field(description="Reserves this version cannot carry.")
    tax: TaxSection = Field(description="Tax, which this version cannot carry.")
    criterion: CriterionSection = Field(description="When the test counts as met.")
    horizon: HorizonSection = Field(description="How far, and what the rest is worth.")
    discounting: DiscountingSection = Field(description="The NPV gap's discount.")
    rates: RatesSection = Field(description="Rate paths.")
    liabilities: LiabilitiesSection = Field(description="How the streams are bound to the rate paths.")
    texts: TextsSection = Field(default_factory=TextsSection, description="Words for the report, each optional.")
    numerics: NumericsSection = Field(default_factory=NumericsSection, description="Numerical choices, each optional.")


def study_json_schema() -> dict[str, Any]:
    """study.toml as JSON Schema 2020-12, for editors that complete and check TOML."""
    schema = StudyForm.model_json_schema()
    return {"$schema": "https://json-schema.org/draft/2020-12/schema", **schema, "title": "study.toml"}
