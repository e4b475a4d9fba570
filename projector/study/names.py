"""Names and texts as they may stand in a study, and the nearest name to one that may not."""

from __future__ import annotations

import re
from collections.abc import Iterable
from difflib import get_close_matches

TEXT_AT_MOST = 200  # characters of a name or a cell
WORDS_AT_MOST = 4000  # characters of a rationale or a note
_IDENTIFIER = re.compile(r"[a-z][a-z0-9_]*")


def is_identifier(text: str) -> bool:
    """Whether the text is a lower-case name such as deferred_annuities."""
    return _IDENTIFIER.fullmatch(text) is not None


def text_fault(text: str, at_most: int = TEXT_AT_MOST, *, lines: bool = False) -> str | None:
    """What is wrong with a text, as a clause, or None.

    at_most  characters allowed
    lines    whether line breaks may stand in it
    """
    if len(text) > at_most:
        return f"has {len(text)} characters, at most {at_most} are allowed"
    if text != text.strip():
        return "starts or ends with a space"
    looked_at = text.replace("\n", "") if lines else text
    if not looked_at.isprintable():
        odd = next(character for character in looked_at if not character.isprintable())
        return f"has a character that cannot be printed, U+{ord(odd):04X}"
    return None


def shown(text: object, at_most: int = 80) -> str:
    """A name or a reason as it may stand in a sentence: printable, one line, not long."""
    first = (str(text).splitlines() or [""])[0][:at_most]
    return "".join(character if character.isprintable() else "?" for character in first)


def nearest(name: str, names: Iterable[str]) -> str | None:
    """The closest of the names, compared without case, or None when none is close."""
    by_lower = {other.lower(): other for other in names}
    found = get_close_matches(name.lower()[:TEXT_AT_MOST], list(by_lower), n=1, cutoff=0.6)
    return by_lower[found[0]] if found else None


def listed(names: Iterable[str], at_most: int = 12) -> str:
    """Names as a list to be read: a, b, c and 5 more."""
    all_names = [name if name.isprintable() else ascii(name) for name in names]
    if len(all_names) <= at_most:
        return ", ".join(all_names)
    return f"{', '.join(all_names[:at_most])} and {len(all_names) - at_most} more"
