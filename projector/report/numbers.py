"""The one set of formatters: page, charts, text alternatives and workbook notes write numbers with these only.

Every figure is rounded once, half to even, from its full value. Negative figures carry the minus sign U+2212 and
zero never carries one.
"""

from __future__ import annotations

import math
import unicodedata
from dataclasses import dataclass
from datetime import date, datetime
from decimal import Decimal
from typing import Any

MINUS = "\u2212"
NOT_AVAILABLE = "[n/a]"
SYMBOLS = {"USD": "$", "EUR": "€", "GBP": "£", "JPY": "¥"}
SMALL_STUDY = 50e6  # reserves under this switch the whole report to thousands [currency]


def fixed(value: float, decimals: int = 0) -> str:
    """A level with thousands separators: 2,733.5 or −13.7; never −0.0."""
    if not math.isfinite(value):
        raise ValueError("a figure of the report is not finite; the caller says why it is not available")
    text = f"{value:,.{decimals}f}"
    if not text.startswith("-"):
        return text
    bare = text[1:]
    return bare if not any(digit in bare for digit in "123456789") else MINUS + bare


def signed(value: float, decimals: int = 0) -> str:
    """A change or difference: +1.2, −1.2, and 0.0 without a sign."""
    text = fixed(value, decimals)
    return text if text.startswith(MINUS) or as_number(text) == 0 else f"+{text}"


def percent(value: float, decimals: int = 1) -> str:
    """A share or rate given as a decimal: 0.106 becomes 10.6%."""
    return f"{fixed(100.0 * value, decimals)}%"


def share(part: float, whole: float, decimals: int = 1) -> str:
    """A part of a whole in percent; a whole of zero has no share."""
    return percent(part / whole, decimals) if whole else "none"


def basis_points(value: float) -> str:
    """A spread in whole basis points, without the unit."""
    return fixed(value, 0)


def as_number(shown: str) -> Decimal:
    """What a printed figure says: the inverse of `fixed`, used to see whether printed items add to their total."""
    return Decimal(shown.replace(MINUS, "-").replace("+", "").replace(",", "").rstrip("%"))


@dataclass(frozen=True)
class Money:
    """How this report writes money: one unit for the whole report, one decimal."""

    symbol: str  # "$", or a currency code followed by a space
    scale: float  # currency units in one printed unit
    word: str  # "million" or "thousand"

    @property
    def unit(self) -> str:
        """The unit as captions and headers name it: "$ million"."""
        return f"{self.symbol.strip()} {self.word}"

    def text(self, amount: float) -> str:
        """An amount in the report's unit, without the unit; [n/a] where the results hold none."""
        return fixed(amount / self.scale, 1) if math.isfinite(amount) else NOT_AVAILABLE

    def phrase(self, amount: float) -> str:
        """An amount as running text writes it: $13.9 million, −$13.9 million."""
        text = self.text(amount)
        if text == NOT_AVAILABLE:
            return text
        sign, bare = (MINUS, text[1:]) if text.startswith(MINUS) else ("", text)
        return f"{sign}{self.symbol}{bare} {self.word}"

    def is_negative(self, amount: float) -> bool:
        """Whether the amount prints with a minus sign."""
        return self.text(amount).startswith(MINUS)

    def is_zero(self, amount: float) -> bool:
        """Whether the amount prints as 0.0."""
        return math.isfinite(amount) and as_number(self.text(amount)) == 0


def money_for(currency: str, reserves: float) -> Money:
    """Millions, or thousands for a study under 50 million of reserves."""
    symbol = SYMBOLS.get(currency, f"{currency} ")
    return Money(symbol, 1e6, "million") if abs(reserves) >= SMALL_STUDY else Money(symbol, 1e3, "thousand")


def cents(amount: float) -> str:
    """Control totals: units and hundredths, because they must tie."""
    return fixed(amount, 2)


def month_label(start: date, months: int) -> str:
    """The month that many months after a date, as YYYY-MM."""
    count = start.year * 12 + start.month - 1 + int(months)
    return f"{count // 12:04d}-{count % 12 + 1:02d}"


def date_words(day: date) -> str:
    """December 31, 2025."""
    names = [
        "January",
        "February",
        "March",
        "April",
        "May",
        "June",
        "July",
        "August",
        "September",
        "October",
        "November",
        "December",
    ]
    return f"{names[day.month - 1]} {day.day}, {day.year}"


def as_date(value: Any) -> date | None:
    """A date from whatever a frame holds it as; nothing for an empty cell."""
    if isinstance(value, datetime):  # pandas' own missing date is one too, and has no year
        return value.date() if value == value else None
    if isinstance(value, date):
        return value
    if isinstance(value, str) and value:
        return date.fromisoformat(value[:10])
    return None


def years_between(start: date, end: date) -> float:
    """Whole months between two month ends, in years."""
    return (12 * (end.year - start.year) + end.month - start.month) / 12.0


def count_of(number: int, one: str, many: str = "") -> str:
    """1 scenario, 2 scenarios, no scenarios."""
    plural = many or f"{one}s"
    if number == 0:
        return f"no {plural}"
    return f"{fixed(number)} {one if number == 1 else plural}"


def listed(names: list[str], at_most: int = 3) -> str:
    """A, B and C; from the fourth on "and n more"."""
    shown, rest = names[:at_most], len(names) - at_most
    if rest > 0:
        return f"{', '.join(shown)} and {fixed(rest)} more"
    return shown[0] if len(shown) == 1 else f"{', '.join(shown[:-1])} and {shown[-1]}" if shown else "none"


def closed(text: str) -> str:
    """A text of the study as the end of a sentence: with one full stop."""
    return text if text.endswith((".", "!", "?")) else f"{text}."


TURNING = "\u202a\u202b\u202c\u202d\u202e\u2066\u2067\u2068\u2069"  # letters that turn the direction of what follows


def clean(text: str) -> str:
    """Text of the study without control letters or direction marks that would reach beyond it."""
    return "".join(
        "\ufffd" if c in TURNING or (unicodedata.category(c) in ("Cc", "Cs") and c not in "\n\t") else c for c in text
    )
