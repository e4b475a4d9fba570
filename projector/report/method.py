"""Section 7 in data: every formula with its id, its words, its symbols and its published source.

The ids are cited by the cells of all tables. Sources marked "cited from memory" were not open when this was written.
"""

from __future__ import annotations

from dataclasses import dataclass, field

from projector.report.parts import told

OWN = "Definition of this report"
MEMORY = "cited from memory"


@dataclass(frozen=True)
class Formula:
    """One formula of the report."""

    id: str = field(metadata=told("formula id, cited by cells"))
    name: str = field(metadata=told("what it gives"))
    words: str = field(metadata=told("the formula in words, with unit and sign"))
    symbols: str = field(metadata=told("the formula in symbols"))
    source: str = field(metadata=told("published source, or that it is a definition of this report"))


FORMULAS = (
    Formula("M-1", "Statement surplus",
            "Statement value of bonds, cash, accrued interest and recoveries not yet received, less statutory "
            "reserve, borrowing and shortfall account. Currency, positive = assets exceed liabilities.",
            "S = B + C + I + V − R − L − F",
            f"{OWN}; statutory balance sheet, NAIC annual statement, page 2 and 3 ({MEMORY})"),
    Formula("M-2", "Market surplus",
            "Market value of bonds with accrued interest, cash and recoveries, less borrowing, shortfall account and "
            "the liability at the close-out value the study names.",
            "S* = MV + C + V − L − F − R*", OWN),
    Formula("M-3", "Present value of ending surplus, by net earned rate",
            "Statement surplus at the horizon, discounted year by year at the net earned rates (M-13) of the same "
            "scenario and segment; all segments: the sum of the segments' values.",
            "PV = S(T) × Π 1 / (1 + e(y))",
            f"American Academy of Actuaries, Asset Adequacy Analysis practice note, 2017 ({MEMORY})"),
    Formula("M-4", "Present value of ending surplus, by one-month Treasury",
            "The same surplus discounted at the path's one-month rates.", "PV = S(T) × Π d(m)", OWN),
    Formula("M-5", "Lowest surplus",
            "The smallest surplus at a year end, year 1 and later, undiscounted, and the first year end at "
            "which it stands.",
            "min over y ≥ 1 of S(12 y)", OWN),
    Formula("M-6", "Criterion value",
            "The criterion's measure at the worst of the dates the study names; met when it is not below the limit.",
            "min over dates of S, against the limit", "The study's own criterion, quoted on page 1"),
    Formula("M-7", "NPV gap",
            "Present value of the run-off flows of the starting holdings and of opening cash, less that of net "
            "liability outgo, at the path's one-month rates plus the constant of the study. No sale and no purchase "
            "enters. Holdings and liability left at the horizon enter at their close-out values, each also shown "
            "apart.",
            "Σ D(m) × (A(m) − N(m)) + C(0) + D(T) × (A* − R*)", OWN),
    Formula("M-8", "IRR of assets",
            "The annual effective rate at which the run-off flows and opening cash are worth the outlay: market "
            "value with accrued interest, or statement value where so named. Several sign changes can give no root "
            "or several; the status is printed in words.",
            "outlay = Σ A(m) × (1 + i)^(−m/12)", f"Kellison, The Theory of Interest, 3rd ed., 2009, ch. 7 ({MEMORY})"),
    Formula("M-9", "Cost rate", "The annual effective rate at which net liability outgo is worth the statutory "
                                "reserve; what is left at the horizon is paid out at its close-out value.",
            "R(0) = Σ N(m) × (1 + k)^(−m/12)", f"Kellison, 2009, ch. 7 ({MEMORY})"),
    Formula("M-10", "IRR gap", "IRR of assets on market value less cost rate, in percentage points; only where both "
                               "have one root.", "i − k", OWN),
    Formula("M-11", "Horizon return", "Yearly internal rate of the whole segment with reinvestment: market value "
                                      "and cash put in, net liability outgo and, at the horizon, market value and "
                                      "cash less debts taken out.",
            "V(0) = Σ N(m) × (1 + h)^(−m/12) + V(T) × (1 + h)^(−T/12)", OWN),
    Formula("M-12", "Yield given up by calls",
            "Called par × (book yield − yield of the purchase mix at that date, both after default cost) × years from "
            "the call to the old worst date, lot by lot. Positive = income given up. Not discounted.",
            "Y = Σ P × (y − n) × t", OWN),
    Formula("M-13", "Net earned rate",
            "Coupons, cash interest, accretion less amortisation, default cost and investment expense of the last 12 "
            "months, over the mean opening statement value and cash of those months. Realised gains are left out.",
            "e = income / mean of (B + C)",
            f"American Academy of Actuaries, Asset Adequacy Analysis practice note, 2017 ({MEMORY})"),
    Formula("M-14", "Statement value",
            "Amortised cost: the constant effective yield from statement value to the date that gives the lowest "
            "value (lowest yield, of equals the latest). Make-whole rights do not set the date, par calls do. When the "
            "date goes by without a call, the value goes on from the call price. Purchases stay at 100.",
            "B(t+1) + I(t+1) = (B(t) + I(t)) × (1 + y/2)^(1/6) − coupon",
            f"NAIC SSAP No. 26, yield-to-worst (2015-04); constant-yield method ({MEMORY})"),
    Formula("M-15", "Book yield", "The yield of M-14, bond-equivalent, before default cost and expense.",
            "B(0) + I(0) = Σ flows to the worst date at y", f"NAIC SSAP No. 26 ({MEMORY})"),
    Formula("M-16", "Street yield to worst",
            "The lowest bond-equivalent yield over maturity and every call at a stated price, from price with "
            "accrued interest on the security's own day count.",
            "P + I = Σ flow × (1 + y/2)^(−(k − 1 + w))",
            f"Mayle, Standard Securities Calculation Methods, vol. 1, 1993; 31 CFR Part 356, Appendix B ({MEMORY})"),
    Formula("M-17", "Accrued interest", "Interest earned since the last coupon. On paths by mapped months.",
            "I = par × coupon × fraction of the period", f"MSRB Rule G-33 ({MEMORY})"),
    Formula("M-18", "Yield curve",
            "Par yields, bond-equivalent, re-priced by half-year bootstrap; discounts log-linear between nodes, flat "
            "forward beyond the last.", "100 = Σ (c/2) × D(k/2) × 100 + 100 × D(n/2)",
            f"US Treasury, par yield curve methodology, 2021; 31 CFR Part 356 ({MEMORY})"),
    Formula("M-19", "Rate model of the issuer",
            "Hull-White one-factor: normal short rate with mean reversion, fitted to the path's own curve at the "
            "month of decision. State x under the forward measure of each step.",
            "dx = −a x dt + σ dW; r = φ(t) + x",
            "Hull and White, Pricing Interest-Rate-Derivative Securities, Review of Financial Studies 3(4), 1990 "
            f"({MEMORY})"),
    Formula("M-20", "Continuation",
            "The issuer's cost per 100 of going on with the debt and calling when best later: backward over all "
            "later rights, with the issuer's cost inside each of them.",
            "C(k) = E[d × (coupon + min(C(k+1), bar(k+1)))]",
            f"Hull and White, 1990; Andersen and Piterbarg, Interest Rate Modeling, vol. 2, 2010 ({MEMORY})"),
    Formula("M-21", "Bar", "Clean call price + issuer's cost + accrued interest, per 100, ex coupon.",
            "bar = K + 100 f + I", f"{OWN}; refunding cost after Mauer, J. of Financial Research 16(1), 1993 "
                                   f"({MEMORY})"),
    Formula("M-22", "Call decision", "The issuer calls when continuation is at or above the bar; ties call.",
            "call when C ≥ bar", f"King and Mauer, J. of Business 73(3), 2000, for what issuers did ({MEMORY})"),
    Formula("M-23", "Valuation spread",
            "Continuously compounded over the path's Treasury discounts; class spread by rating and life plus the "
            "security's residual, so that the holder's value on the issuer's policy gives back clean price + "
            "accrued.",
            "P + I = V(s)", OWN),
    Formula("M-24", "Refunding and purchase spread",
            "The issuer decides with the class spread of new debt plus concession (or with the valuation spread, "
            "when the study says so); purchases earn the spread the study states for "
            "their class (table 8.3).", "s' = class + concession", OWN),
    Formula("M-25", "Market value",
            "A second backward recursion with the valuation spread on the issuer's exercise set: what the holder "
            "owns while the issuer decides.", "V(k) = E[d × (coupon + (called ? K + I : V(k+1)))]", OWN),
    Formula("M-26", "Make-whole price",
            "The larger of 100 and the present value of remaining payments to the par-call date at the path's par "
            "yield for that life plus the make-whole spread, semiannual 30/360, without accrued.",
            "max(100, Σ flow / (1 + (y + m)/2)^k)", f"Customary US corporate prospectus wording ({MEMORY})"),
    Formula("M-27", "Default cost",
            "One of two forms, named in section 8: a net annual cost by which par decays without recovery; or a "
            "default rate with recovery paid after a lag. In cash only, never in a discount.",
            "par × (1 − q)^(1/12) each month", OWN),
    Formula("M-28", "Purchases",
            "Non-callable bullets bought at 100; the coupon is the one that prices at 100 on the path's curve plus "
            "the purchase spread. Net yield is after default cost.", "100 = Σ (c/2) × D + 100 × D(n)", OWN),
    Formula("M-29", "Borrowing and shortfall account",
            "Interest at the one-month Treasury plus the study's spread. What the limit and the assets cannot meet "
            "goes to the shortfall account, which accrues at the borrowing rate and is deducted from surplus.",
            "L(m) = L(m−1) × (1 + (r + s)/12) + drawn − repaid", OWN),
    Formula("M-30", "Identity",
            "Left and right side of a sum that must hold, compared within 1e−9 of the gross plus 1e−6 currency units.",
            "|left − right| ≤ 1e−9 Σ|terms| + 1e−6", OWN),
    Formula("M-31", "Sums and shares",
            "Sums of full values, and one sum as a percentage of another.", "Σ x; Σ x / Σ z", OWN),
)  # fmt: skip

ORDER_OF_EVENTS = (
    "The curves of the month are known; cash earns the one-month rate of the month before.",
    "Default cost is taken on opening par.",
    "Coupons and scheduled principal of the month are received.",
    "Issuers decide on the value without the month's coupon and, where they call, pay clean price and accrued "
    "interest.",
    "Liabilities are paid and premiums received; then expenses. Tax is not modelled.",
    "Interest on borrowing and its repayment; then the shortfall account.",
    "What is left is invested; what is lacking is borrowed up to the limit, then met by selling one share of every "
    "holding.",
    "Both sides are valued.",
)

CALL_RULE = (
    "At every month with a right at a stated price, the issuer looks at that path's curve of that month and at "
    "nothing later.",
    "Continuation (M-20) is the least the issuer can expect to pay by going on, in the rate model M-19, with the "
    "refunding spread M-24 and with the issuer's cost inside every later right.",
    "The bar (M-21) is what calling now costs: clean price, issuer's cost, accrued interest.",
    "The issuer calls when continuation is at or above the bar (M-22); ties call.",
    "Where notice is due (in whole months, the nearest), the decision falls so many months before the payment. The bar "
    "is then what calling costs seen from the decision: interest until the payment, price and cost, discounted on that "
    "month's own curve with the refunding spread. What is announced stays announced.",
    "Where the holder may put, he does so when going on is worth at most the put price to him, at the valuation "
    "spread; on a date with both rights the issuer decides first. Such securities are solved without a bound.",
    "Where a sinking payment may be doubled, the issuer retires as much again at 100 when going on costs at least 100 "
    "and the cost; the schedule goes on for what is left in proportion.",
    "A make-whole right is not exercised before the par-call date; from that date the security is callable at 100.",
    "Most decisions are settled by a bound: a policy fixed in advance that costs less than the bar. The others are "
    "solved, and re-solved on finer grids when they lie close to the bar. Table 10.5 counts them.",
    "The holder is paid clean price and accrued interest; the issuer's cost goes to others.",
)

THREE_SPREADS = (
    (
        "Valuation spread (M-23)",
        "what the holder's value is discounted with; found from the price at the valuation date",
    ),
    ("Refunding spread (M-24)", "what the issuer would pay on new debt; the decision is made with it"),
    ("Purchase spread (M-24)", "what newly bought bonds earn over Treasury"),
)


@dataclass(frozen=True)
class Limit:
    """A limit of the model in a fixed form."""

    does: str = field(metadata=told("what the model does"))
    really: str = field(metadata=told("what really happens"))
    direction: str = field(metadata=told("direction of the effect, by kind of scenario"))
    size: str = field(metadata=told("size, where tried"))


LIMITS = (
    Limit("Issuers call as soon as it is optimal within the stated model.",
          "Issuers often call later than this (King and Mauer, 2000, cited from memory).",
          "By scenario in table 10.1: where yield given up is positive, later calls raise the result; where it is "
          "negative, they lower it.", "Not tried in this version (rules side by side, section 10)."),
    Limit("One factor moves the whole curve in the issuer's mind.",
          "Slopes move too, and issuers hedge them.", "Unknown in each scenario.", "Not tried in this version."),
    Limit("Credit spreads do not move with rates; a residual fades as section 8 states.",
          "Spreads often widen when rates fall, which delays calls.",
          "Later calls in falling scenarios, so the result there is lower in the model than with wider spreads; no "
          "effect where nothing is called.",
          "Not tried in this version."),
    Limit("Calls take the whole issue.", "Some calls are partial, by lot or pro rata.",
          "Unknown; small where many issuers are held.", "Not tried in this version."),
    Limit("Calls for mergers, special events and refunding bans are left out.", "They happen in any scenario.",
          "Lower result in falling scenarios, higher in rising ones.", "Not tried in this version."),
    Limit("Flows are placed at month ends.", "They fall on their dates.",
          "Payments come up to a month later here, so values are lower at the same spread; the spread is fitted to the "
          "price, which takes most of it back.", "Stated in section 4."),
    Limit("Liability flows are supplied by scenario and do not react to what this program finds.",
          "Crediting and lapses follow the earned rate.",
          "Depends on the supplied streams; unknown here.", "Not tried in this version."),
    Limit("Tax is nil.", "Gains are taxed, losses give relief.",
          "Lower result after tax where there are gains, higher where losses are relieved.",
          "Not tried in this version."),
    Limit("Interest maintenance reserve is nil: gains and losses on sales and calls go to surplus at once.",
          "Interest-related gains and losses are deferred and released over the remaining life.",
          "Lows after losses on sales are deeper here; surplus after gains is higher here (gain on sales: table 9.6).",
          "Not tried in this version."),
    Limit("Asset valuation reserve is nil.", "It takes credit losses first and is built up from income.",
          "Surplus is higher here by what would be held.", "Not tried in this version."),
)  # fmt: skip
