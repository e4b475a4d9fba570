"""The form's own complaints, re-written: what is wrong, what is allowed, what to do, at the line of the key."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

from projector.study.cells import figure
from projector.study.names import listed, nearest

# (code, problem, remedy) from the complaint's context and the value as read
Words = tuple[str, str, str]


@dataclass(frozen=True)
class Complaint:
    """One complaint of the form: its kind, its context and the value it met."""

    kind: str
    context: dict[str, Any]
    value: Any
    description: str | None

    def allowed(self, otherwise: str) -> str:
        """What may stand here, in the words of the form."""
        return f"needed here: {self.description}" if self.description else otherwise


def _number(complaint: Complaint) -> Words:
    if isinstance(complaint.value, int) and not isinstance(complaint.value, bool):
        return "E205", "this number is out of range", complaint.allowed("write a smaller number")
    return "E204", "this is not a number", complaint.allowed("write a decimal number") + ", without quotes"


def _whole(complaint: Complaint) -> Words:
    return "E204", "this is not a whole number", complaint.allowed("write a whole number") + ", without point or quotes"


def _text(complaint: Complaint) -> Words:
    return "E204", "this is not a text", complaint.allowed("write a text") + ", in quotes"


def _date(complaint: Complaint) -> Words:
    return "E204", "this is not a date", "write a day as YYYY-MM-DD without quotes or time"


def _list(complaint: Complaint) -> Words:
    return "E204", "this is not a list", "write a list in square brackets, or sections with double brackets"


def _section(complaint: Complaint) -> Words:
    return "E204", "this is not a section of keys", "write it as a section with its own keys"


def _range(complaint: Complaint) -> Words:
    sign = {"ge": "at least", "gt": "more than", "le": "at most", "lt": "less than"}
    limits = [f"{sign[key]} {figure(float(limit))}" for key, limit in complaint.context.items() if key in sign]
    remedy = f"allowed is {' and '.join(limits)}"
    if complaint.description:
        remedy = f"{remedy} ({complaint.description})"
    return "E205", "this number is out of range", remedy + _percent(complaint)


def _percent(complaint: Complaint) -> str:
    limit, value = complaint.context.get("le"), complaint.value
    if limit is None or not isinstance(value, int | float) or limit > 1 or not 0 < value / 100 <= limit:
        return ""
    return f"; did you mean {figure(value / 100)}, which is {figure(float(value))} %"


def _multiple(complaint: Complaint) -> Words:
    return "E205", f"this is not a multiple of {complaint.context['multiple_of']}", complaint.allowed("correct it")


def _choice(complaint: Complaint) -> Words:
    choices = complaint.context["expected"].replace(" or ", ", ").replace("'", "").split(", ")
    close = nearest(complaint.value, choices) if isinstance(complaint.value, str) else None
    meant = f"did you mean {close}? Allowed are " if close else "write one of "
    return "E206", "this is none of the choices", meant + listed(choices, 30)


def _kind(complaint: Complaint) -> Words:
    kinds = complaint.context.get("expected_tags", "'seven_deterministic', 'shift_table', 'history', 'imported'")
    choices = kinds.replace("'", "").split(", ")
    if complaint.kind == "union_tag_not_found":
        return "E202", "the key kind is missing", f"write kind as one of {listed(choices)}"
    close = nearest(str(complaint.context["tag"]), choices)
    meant = f"did you mean {close}? Allowed are " if close else "write one of "
    return "E206", "this kind of paths is unknown", meant + listed(choices)


def _finite(complaint: Complaint) -> Words:
    return "E207", "this is not a finite number", complaint.allowed("write a decimal number")


def _pattern(complaint: Complaint) -> Words:
    return "E210", "this text does not have the right form", complaint.allowed("correct it")


def _fault(complaint: Complaint) -> Words:
    return "E210", f"this text {complaint.context['problem']}", complaint.allowed("write a short printable text")


def _too_short(complaint: Complaint) -> Words:
    return "E202", "this list is empty", "write at least one entry"


def _too_long(complaint: Complaint) -> Words:
    found, most = complaint.context["actual_length"], complaint.context["max_length"]
    return "E205", f"this list has {found:,} entries", f"write at most {most}"


_WORDS: dict[str, Callable[[Complaint], Words]] = {
    "float_type": _number,
    "int_type": _whole,
    "int_from_float": _whole,
    "string_type": _text,
    "date_type": _date,
    "list_type": _list,
    "model_type": _section,
    "model_attributes_type": _section,
    "dict_type": _section,
    "greater_than_equal": _range,
    "greater_than": _range,
    "less_than_equal": _range,
    "less_than": _range,
    "multiple_of": _multiple,
    "literal_error": _choice,
    "union_tag_invalid": _kind,
    "union_tag_not_found": _kind,
    "finite_number": _finite,
    "string_pattern_mismatch": _pattern,
    "string_too_long": _pattern,
    "text_fault": _fault,
    "too_short": _too_short,
    "too_long": _too_long,
}


def reworded(complaint: Complaint) -> Words:
    """Code, problem and remedy of a complaint that is about a value."""
    if isinstance(complaint.value, float) and not math.isfinite(complaint.value):
        return _finite(complaint)
    if complaint.kind in _WORDS:
        return _WORDS[complaint.kind](complaint)
    return "E204", "this value cannot stand here", complaint.allowed("correct it")
