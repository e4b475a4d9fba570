"""How deep study.toml is nested, by a plain scan before any parser sees it.

A key of thousands of dots makes a parser build as many tables, one in the other, and costs it the square of them.
"""

from __future__ import annotations

import re

DEPTH_AT_MOST = 20  # dots in a key or header, and brackets inside brackets; a study has 2
# Texts and comments are taken whole, so that nothing in them counts; every group is possessive: nothing is read twice.
_PIECE = re.compile(
    r""""{3}(?:[^"\\]|\\(?:.|\Z)|"(?!""))*+(?:"{3,5}|\Z)"""
    r"""|'{3}(?:[^']|'(?!''))*+(?:'{3,5}|\Z)"""
    r"""|"(?:[^"\\\n]|\\[^\n])*+"?"""
    r"""|'[^'\n]*+'?"""
    r"|#[^\n]*+"
    r"|(?:[A-Za-z0-9_+:-]|[^\S\n])++"
    r"|(?P<mark>.)",
    re.DOTALL,
)


def too_deep_at(text: str) -> int | None:
    """The line where a key or header has more than 20 dots, or brackets are opened more than 20 deep; None: nowhere."""
    dots = brackets = 0
    for piece in _PIECE.finditer(text):
        mark = piece["mark"]
        if mark is None:
            continue
        dots = dots + 1 if mark == "." else 0
        brackets = max(0, brackets + (mark in "[{") - (mark in "]}"))
        if max(dots, brackets) > DEPTH_AT_MOST:
            return text.count("\n", 0, piece.start()) + 1
    return None
