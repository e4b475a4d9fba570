"""What an answer holds: records and columns, no calculation. The report reads these and nothing else of this room."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date

import pandas as pd

NO_RIGHT, BY_BOUND, BY_SOLVE, BY_FINER = "no right", "bound", "solved", "re-solved near a tie"
CALLED, KEPT, MATURED = "called", "kept", "matured"

# Column -> (unit, meaning); one row a month from the valuation date to the call, maturity or horizon
COLUMNS: dict[str, tuple[str, str]] = {
    "month": ("month", "month end after the valuation date"),
    "date": ("date", "that month end"),
    "promised": ("per 100", "coupon and redemption promised for the month"),
    "accrued": ("per 100", "interest accrued at the month end, by mapped months, ex coupon"),
    "call_price": ("per 100", "clean price at which a right is live; empty when none is"),
    "bar": ("per 100", "what calling costs the issuer: clean price + issuer's cost + accrued"),
    "upper_bound": ("per 100", "cost of the best policy fixed in advance, an upper bound of continuation"),
    "continuation": ("per 100", "issuer's cost of going on, solved on that month's own curve; empty where the bound "
                                "settled the decision, unless every right was asked to be solved"),
    "settled_by": ("-", f"{NO_RIGHT}, {BY_BOUND}, {BY_SOLVE}, or {BY_FINER}"),
    "refunding_yield": ("1/year", "issuer's par yield for the remaining life, Treasury + refunding spread, "
                                  "bond-equivalent; empty at maturity"),
    "critical_yield": ("1/year", "refunding yield after the parallel shift of the month's quoted yields at which "
                                 "continuation equals the bar; empty without a right or where no shift does it"),
    "decision": ("-", f"{NO_RIGHT}, {KEPT}, {CALLED}, or {MATURED}"),
    "issuer_saving": ("per 100", "continuation - bar: what calling saves the issuer (negative: what it would cost)"),
    "holder_value": ("per 100", "holder's value of the bond not called this month, accrued included, ex coupon"),
    "holder_loss": ("per 100", "holder_value - (clean price + accrued): what a call takes from the holder"),
    "par_held": ("currency", "par held on this path before the month's own call: after default and sale"),
    "issuer_saving_amount": ("currency", "issuer_saving on par_held"),
    "holder_loss_amount": ("currency", "holder_loss on par_held"),
}  # fmt: skip

CODES = {
    "E601": "the question names a security that the study does not hold",
    "E602": "the question names a scenario that the study does not have",
}


@dataclass(frozen=True, kw_only=True)
class CallStory:
    """The life of one security on one path, as an answer to why it was or was not called.

    decided, paid  month of the issuer's decision and of payment; None when it is not called
    rights         months in which a right can be decided by the schedule, whether or not the security lives that long
    make_whole     whether a make-whole right stands in the schedule (read, never used before the par-call date)
    """

    security_id: str
    issuer: str
    coupon_rate: float  # [1/year]
    maturity_date: date
    scenario: str
    scenario_title: str
    currency: str
    valuation_date: date
    maturity: int  # [month]
    horizon: int  # [month]
    cost: float  # issuer's cost of calling [per 100]
    stated_price: bool  # rights at a stated price; otherwise the par call of a make-whole security
    make_whole: bool
    rights: tuple[int, ...]
    announced: bool  # called before the valuation date, paid at `maturity` at `redemption`
    redemption: float  # [per 100 of the par left]
    put: tuple[int, int, float] | None  # the holder's put: months of payment and decision, clean price
    doubled: tuple[int, ...]  # months whose sinking payment the issuer doubled
    notice: int  # from the issuer's decision to the payment [month]
    decided: int | None
    paid: int | None
    months: pd.DataFrame

    @property
    def scenario_name(self) -> str:
        """Identifier and title together."""
        return f"{self.scenario} {self.scenario_title}".strip()

    @property
    def live(self) -> pd.DataFrame:
        """Months with a live right."""
        return self.months[self.months["call_price"].notna()]
