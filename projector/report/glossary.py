"""Section 18 in data: what each word means here, with sign, unit and formula id."""

from __future__ import annotations

from dataclasses import dataclass, field

from projector.report.parts import told


@dataclass(frozen=True)
class Term:
    """One word of the report."""

    id: str = field(metadata=told("anchor"))
    word: str = field(metadata=told("the word"))
    meaning: str = field(metadata=told("one sentence: what it is here, sign, unit, formula"))


def _term(word: str, meaning: str) -> Term:
    return Term("g-" + "-".join("".join(c if c.isalnum() else " " for c in word.lower()).split()), word, meaning)


TERMS = (
    _term("Additional reserve", "The amount added to reserves at the valuation date that meets the criterion; money, "
                                "positive; not calculated in this version."),
    _term("Bar", "What calling now costs the issuer per 100 of par: clean price, issuer's cost, accrued interest "
                 "(M-21)."),
    _term("Book yield", "The effective yield from statement value to the worst date, bond-equivalent, % a year "
                        "(M-15)."),
    _term("Borrowing", "Short-term debt drawn before anything is sold; money, positive, deducted from surplus (M-29)."),
    _term("Bought", "Bonds purchased in the projection, as against the starting holdings."),
    _term("Call right", "A right of the issuer to repay at a stated price, or at a make-whole price, on stated dates."),
    _term("Callable par", "Par of starting holdings that can be called at a stated price; par calls of make-whole "
                          "securities are counted apart; money."),
    _term("Clean price", "Price per 100 of par without accrued interest."),
    _term("Continuation", "The issuer's cost per 100 of going on with the debt and calling when best later (M-20)."),
    _term("Cost rate", "IRR of the liability stream on the statutory reserve, % a year (M-9)."),
    _term("Criterion", "The study's own sentence that says when the test counts as met, fixed before the results."),
    _term("Criterion value", "The criterion's measure at its worst date; money, negative = below zero (M-6)."),
    _term("Ending surplus", "Surplus at the horizon, undiscounted; money, sign as surplus."),
    _term("Horizon", "The last month projected; what remains there is valued as section 8 states."),
    _term("Identity", "A sum that must hold, checked by separate code; one that does not hold stops the run (M-30)."),
    _term("Information date", "The date up to which facts were taken into account."),
    _term("Interest maintenance reserve", "Statutory reserve of realised interest gains and losses, with its sign; "
                                          "nil in this version."),
    _term("IRR gap", "IRR of assets less cost rate, percentage points; printed only where both have one root (M-10)."),
    _term("Issuer's cost", "Cost of refunding as a share of par, borne by the issuer and paid to others."),
    _term("Key rate", "A point of the yield curve moved alone; not used by this version."),
    _term("Lowest surplus", "The smallest surplus at a year end, year 1 and later, undiscounted; money (M-5)."),
    _term("Make-whole", "A right to repay at a price that gives the holder the value of the payments lost (M-26)."),
    _term("Market surplus", "Market value of assets less liabilities at the close-out value; money (M-2)."),
    _term("Month called", "The month in which the holder is paid, as YYYY-MM."),
    _term("NPV gap", "Present value of run-off flows less that of net liability outgo; money, negative = assets "
                     "worth less (M-7)."),
    _term("Option-adjusted spread", "The constant spread over Treasury at which the model's value is the market "
                                    "price, bp, continuously compounded; here the valuation spread (M-23)."),
    _term("Path", "One future course of the yield curve, month by month."),
    _term("Present value of ending surplus", "Ending statement surplus discounted to the valuation date, by net "
                                             "earned rate unless another way is named; money (M-3, M-4)."),
    _term("Pricing measure", "Probabilities under which prices are discounted means; good for values and for the "
                             "issuer's decision, not a forecast."),
    _term("Purchase spread", "Spread over Treasury earned on bonds bought, bp (M-24)."),
    _term("Real-world measure", "Probabilities meant to describe what may happen; no such paths were run."),
    _term("Refunding spread", "The issuer's spread for new debt, with which it decides, bp (M-24)."),
    _term("Run", "One projection of a study, with its results and this report."),
    _term("Scenario", "A path with its name, such as the ones of section 6; not a forecast, none more likely than "
                      "another."),
    _term("Segment", "A block of business with its own assets; segments add by scenario, never by their worst dates."),
    _term("Shortfall account", "What assets and the borrowing limit could not meet; accrues interest and is deducted "
                               "from surplus; money, positive (M-29)."),
    _term("Statement surplus", "Statement value of assets less statutory liabilities; money, negative = below zero "
                               "(M-1)."),
    _term("Statement value", "Amortised cost at the constant effective yield to the worst date; money (M-14)."),
    _term("Study", "All inputs of one valuation, archived together."),
    _term("Tail mean (CTE)", "The mean of the worst stated share of random paths; not calculated in this version."),
    _term("Valuation date", "The date at which assets and liabilities are measured."),
    _term("Worst date", "The maturity or call date that gives the lowest statement value (M-14)."),
    _term("Yield given up", "Income lost by calls: called par × yield difference × years to the old worst date; "
                            "money, positive = lost (M-12)."),
)  # fmt: skip
