"""Tables of `projector value`: columns, units and meanings; a test holds the frames to them."""

from __future__ import annotations

from projector.rates.key_rates import KEY_NAMES

MAPPED = "on mapped month ends (C1)"
EXACT = "on exact dates"

REQUIRED_COLUMNS = {
    "required_yield": ("1/year", "minimum yield asked for, bond-equivalent"),
    "price_at_required_yield": ("per 100", f"lowest clean price at that yield over all calls and maturity, {EXACT}"),
    "required_yield_date": ("date", "redemption that gives that price"),
}

VALUE_COLUMNS: dict[str, dict[str, tuple[str, str]]] = {
    "holdings": {
        "security_id": ("-", "security"),
        "issuer": ("-", "issuer"),
        "asset_class": ("-", "asset class"),
        "rating": ("-", "rating"),
        "coupon_rate": ("1/year", "coupon"),
        "maturity_date": ("date", "maturity"),
        "call_form": ("-", "none, european, bermudan, american, make_whole (with par call), or several joined by +"),
        "par": ("currency", "par over all lots"),
        "market_value": ("currency", "clean price x par, as in the securities table of a run"),
        "market_value_with_accrued": ("currency", "dirty price x par"),
        "clean_price": ("per 100", f"price stated or, where a spread was stated, modelled {MAPPED}"),
        "accrued": ("per 100", f"accrued interest {EXACT} by the day count"),
        "dirty_price": ("per 100", "clean price + accrued"),
        "yield_to_maturity": ("1/year", f"street yield {EXACT}, bond-equivalent; empty where none within 100 %"),
        "yield_to_worst": ("1/year", f"lowest street yield over calls and maturity {EXACT}, bond-equivalent"),
        "worst_date": ("date", "redemption that gives the yield to worst, of equals the latest"),
        "worst_price": ("per 100", "clean price paid then"),
        "spread_to_treasury_maturity_bp": (
            "bp",
            "yield to maturity less the starting curve's par yield for that life, linear between half-years, a simple"
            " yield below half a year",
        ),
        "spread_to_treasury_worst_bp": (
            "bp", "yield to worst less the starting curve's par yield for the life to the worst date, the same",
        ),
        "oas_bp": (
            "bp",
            f"option-adjusted spread {MAPPED}: continuously compounded over Treasury, meets the clean price plus mapped"
            " accrued under the issuer's policy; see spread_from",
        ),
        "spread_from": (
            "-",
            "price; given (spread stated, price modelled); rating_spread (no usable spread gives the price: the class"
            " spread stands in oas_bp, and model_price is not clean_price)",
        ),
        "model_price": ("per 100", f"clean price {MAPPED} at oas_bp, the issuer deciding at its refunding spread"),
        "straight_value": ("per 100", f"clean value of the promised payments {MAPPED} at oas_bp"),
        "option_value": (
            "per 100",
            "straight value less model price: what the rights cost the holder; below nothing where a put is worth"
            " more to him, or the issuer's refunding spread makes it call to his gain",
        ),
        "effective_duration": ("year", f"two-sided, 25 bp on the quoted yields, spreads held {MAPPED}"),
        "effective_convexity": ("year^2", f"the same, second difference over the value, not halved {MAPPED}"),
        **{
            f"key_rate_{name}": (
                "year",
                f"two-sided, 5 bp on the quoted yields around {name}, triangular; the twelve add up to the duration",
            )
            for name in KEY_NAMES
        },
        "next_call_date": ("date", "first date of a right at a stated price, empty when none"),
        "next_call_price": ("per 100", "clean price on that date"),
        "refunding_yield": (
            "1/year",
            "yield of the issuer's new par bond on today's curve for the life left at its next right, bond-equivalent",
        ),
        "critical_refunding_yield": (
            "1/year",
            f"that yield on the curve, today's moved in parallel, at which calling at the next right is just worth it"
            f" {MAPPED}; empty where there is no right or no shift within 10 points reaches it",
        ),
        "never_called": (
            "-",
            f"model chance of reaching maturity {MAPPED}: pricing measure, not a forecast; empty where rights take"
            " notice, may be put, or stand on par repaid in parts",
        ),
        "make_whole_price": ("per 100", f"clean make-whole price today {EXACT}; empty where no such right is in force"),
    },
    "call_yields": {
        "security_id": ("-", "security"),
        "redemption": ("-", "call or maturity"),
        "date": ("date", "first and last usable date of every call price ahead, and maturity"),
        "price": ("per 100", "clean price paid then"),
        "yield": ("1/year", f"street yield to that redemption {EXACT}, bond-equivalent; empty where none within 100 %"),
    },
    "call_odds": {
        "security_id": ("-", "security with a right at a stated price ahead"),
        "year": ("year", "calendar year of the call"),
        "probability": (
            "-",
            f"model chance of being called in that year {MAPPED}: pricing measure, not a forecast; with never_called"
            " they add to one",
        ),
    },
}  # fmt: skip


def value_columns(required: bool) -> dict[str, dict[str, tuple[str, str]]]:
    """The tables, with the columns of a required yield after the worst price when one was asked for."""
    if not required:
        return VALUE_COLUMNS
    holdings: dict[str, tuple[str, str]] = {}
    for name, meaning in VALUE_COLUMNS["holdings"].items():
        holdings[name] = meaning
        if name == "worst_price":
            holdings |= REQUIRED_COLUMNS
    return VALUE_COLUMNS | {"holdings": holdings}
