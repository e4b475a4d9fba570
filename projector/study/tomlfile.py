"""study.toml from its text to the typed form, every fault with the line and the key it stands at."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterator
from typing import Any, get_args

from pydantic import BaseModel, ValidationError

from projector.study.errors import LocatedError, StudyRefused
from projector.study.files import STUDY_FILE
from projector.study.names import listed, nearest, shown
from projector.study.schema import StudyForm
from projector.study.tomldepth import too_deep_at
from projector.study.tomlfaults import Complaint, reworded

FILL_IN = "FILL IN"
Place = tuple[str | int, ...]
_PLAIN = "write plain sections and keys as in a new study"

_PLACE_OF_TOML_ERROR = re.compile(r"\s*\(at line (\d+), column (\d+)\)$")
_TABLE = re.compile(r"\s*(\[\[?)\s*([^\[\]]+?)\s*\]\]?\s*(?:#.*)?$")
_KEY = re.compile(r"""\s*((?:[A-Za-z0-9_-]+|"[^"]*"|'[^']*')(?:\s*\.\s*(?:[A-Za-z0-9_-]+|"[^"]*"|'[^']*'))*)\s*=""")


def parse_toml(content: bytes) -> tuple[dict[str, Any], dict[Place, int]]:
    """The keys of study.toml and the line of each."""
    try:
        text = content.decode("utf-8-sig").replace("\r\n", "\n")
    except UnicodeDecodeError as problem:
        row = content.count(b"\n", 0, problem.start) + 1
        raise StudyRefused([_error("E201", row, "the file is not UTF-8 text", "save it as UTF-8")]) from None
    too_deep = too_deep_at(text)
    if too_deep is not None:
        raise StudyRefused([_error("E208", too_deep, "the file is nested too deeply", _PLAIN)])
    try:
        return tomllib.loads(text), dict(key_lines(text))
    except tomllib.TOMLDecodeError as problem:
        found = _PLACE_OF_TOML_ERROR.search(str(problem))
        reason = _PLACE_OF_TOML_ERROR.sub("", str(problem)) or "broken"
        row = int(found.group(1)) if found else text.count("\n") + 1
        where = f" at position {found.group(2)}" if found else ""
        said = f"this is not valid TOML: {shown(reason, 120)}{where}"
        remedy = "correct the line; texts need quotes, dates and numbers do not"
        raise StudyRefused([_error("E201", row, said, remedy)]) from None
    except RecursionError:
        raise StudyRefused([_error("E208", None, "the file is nested too deeply", _PLAIN)]) from None
    except ValueError:  # an integer of thousands of digits
        remedy = "write numbers of at most 17 digits"
        raise StudyRefused([_error("E201", None, "a number has too many digits to be read", remedy)]) from None


def _error(code: str, row: int | None, problem: str, remedy: str) -> LocatedError:
    return LocatedError(code=code, file=STUDY_FILE, row=row, problem=problem, remedy=remedy)


def key_lines(text: str) -> Iterator[tuple[Place, int]]:
    """Where sections and keys stand, by a plain scan: inside an inline table the line is that of its own key."""
    section: Place = ()
    counts: dict[Place, int] = {}
    quotes: str | None = None
    for number, line in enumerate(text.split("\n"), start=1):
        if quotes is not None:
            quotes = None if line.count(quotes) % 2 else quotes
            continue
        if table := _TABLE.match(line):
            section = _section(table.group(1) == "[[", _parts(table.group(2)), counts)
            yield section, number
        elif key := _KEY.match(line):
            yield section + _parts(key.group(1)), number
        quotes = next((mark for mark in ('"""', "'''") if line.count(mark) % 2), None)


def _parts(dotted: str) -> Place:
    return tuple(part.strip().strip("\"'") for part in dotted.split("."))


def _section(repeated: bool, parts: Place, counts: dict[Place, int]) -> Place:
    """The place a header opens; the last [[list]] opened on the way is the one that is meant."""
    place: Place = ()
    for depth, part in enumerate(parts, start=1):
        place = (*place, part)
        if repeated and depth == len(parts):
            counts[place] = counts.get(place, -1) + 1
        if place in counts:
            place = (*place, counts[place])
    return place


def line_of(place: Place, lines: dict[Place, int]) -> int | None:
    """The line of a key, or of the nearest section around it."""
    while place and place not in lines:
        place = place[:-1]
    return lines.get(place)


def dotted(place: Place) -> str:
    """A key as it is spoken of: purchases.classes 2.rating is the rating of the second class."""
    words = "".join(f" {part + 1}" if isinstance(part, int) else f".{part}" for part in place)
    return shown(words.lstrip("."))


def check_form(raw: dict[str, Any], lines: dict[Place, int]) -> tuple[StudyForm | None, list[LocatedError]]:
    """The typed form, or None and what is wrong with it."""
    unfilled = list(_unfilled(raw, ()))
    errors = [
        _at(place, lines, "E211", "this has not been filled in", _asked(place), value) for place, value in unfilled
    ]
    try:
        form = StudyForm.model_validate(raw)
    except ValidationError as problem:
        places = {place for place, _ in unfilled}
        faults = [(_real(raw, fault["loc"]), fault) for fault in problem.errors(include_url=False)]
        errors += _located([(place, fault) for place, fault in faults if place not in places], lines)
        return None, sorted(errors, key=lambda error: error.row or 0)
    return (None if errors else form), errors


def _located(faults: list[tuple[Place, Any]], lines: dict[Place, int]) -> list[LocatedError]:
    """The faults as located errors; an unknown key that is close to a missing one becomes one error with it."""
    missing = dict.fromkeys(place for place, fault in faults if fault["type"] == "missing")  # in the form's order
    errors = []
    for place, fault in faults:
        if fault["type"] == "extra_forbidden":
            errors.append(_unknown_key(place, fault, missing, lines))
        elif fault["type"] != "missing":
            about = Complaint(fault["type"], fault.get("ctx", {}), fault["input"], field_description(place))
            errors.append(_at(place, lines, *_for_rule(place, reworded(about)), fault["input"]))
    errors += [_at(place, lines, "E202", "this key is missing", _asked_for(place)) for place in missing]
    return errors


def _for_rule(place: Place, words: tuple[str, str, str]) -> tuple[str, str, str]:
    """Another call rule is no slip of the pen but a thing this version cannot honour."""
    code, _, remedy = words
    if place == ("call_model", "rule") and code == "E206" and not remedy.startswith("did you mean"):
        return "E511", "this call rule is not honoured by this version", remedy
    return words


def _asked_for(place: Place) -> str:
    description = field_description(place)
    return f"add it: {description[0].lower() + description[1:].rstrip('.')}" if description else "add it"


def _unknown_key(place: Place, fault: Any, missing: dict[Place, None], lines: dict[Place, int]) -> LocatedError:
    """An unknown key; takes its missing neighbour out of `missing` when that is what was meant."""
    key, around = str(place[-1]), place[:-1]
    lacking = [str(other[-1]) for other in missing if other[:-1] == around]
    known = [name for model in models_at(fault["loc"][:-1]) for name in model.model_fields]
    remedy = f"remove it; the keys here are {listed(known, 30)}"
    if close := nearest(key, lacking):
        missing.pop((*around, close), None)
        remedy = f"did you mean {close}? That key is missing"
    elif close := nearest(key, known):
        remedy = f"did you mean {close}? Correct the name or remove the key"
    return _at(place, lines, "E203", "this key is unknown", remedy, fault["input"])


def _unfilled(value: Any, place: Place) -> Iterator[tuple[Place, str]]:
    if isinstance(value, str) and value.startswith(FILL_IN):
        yield place, value
    elif isinstance(value, dict):
        for key, inner in value.items():
            yield from _unfilled(inner, (*place, key))
    elif isinstance(value, list):
        for at, inner in enumerate(value):
            yield from _unfilled(inner, (*place, at))


def _asked(place: Place) -> str:
    description = field_description(place)
    return f"needed here: {description}" if description else f"replace the whole value that starts with {FILL_IN}"


def _at(place: Place, lines: dict[Place, int], code: str, problem: str, remedy: str, value: Any = None) -> LocatedError:
    found = None if value is None or isinstance(value, dict | list) else toml_text(value)
    row, column = line_of(place, lines), dotted(place)
    return LocatedError(
        code=code, file=STUDY_FILE, row=row, column=column or None, value=found, problem=problem, remedy=remedy
    )


def toml_text(value: Any) -> str:
    """A value as TOML writes it, for the eye."""
    if isinstance(value, bool):
        return "true" if value else "false"
    try:
        return str(value)
    except ValueError:  # an integer of thousands of digits
        return "a very long number"


def _real(raw: Any, location: Place) -> Place:
    """The place in the file: the form's choice of a path's kind is no key of it."""
    place: list[str | int] = []
    for part in location:
        if isinstance(part, int) or not isinstance(raw, dict) or part in raw or part == location[-1]:
            place.append(part)
            try:
                raw = raw[part]
            except (KeyError, IndexError, TypeError):
                raw = None
    return tuple(place)


def models_at(place: Place) -> list[type[BaseModel]]:
    """The forms that a place may have; a kind of paths in the place leaves the form of that kind alone."""
    models: list[type[BaseModel]] = [StudyForm]
    for part in place:
        if isinstance(part, str):
            of_kind = [model for model in models if _kind(model) == part]
            models = of_kind or [inner for model in models for inner in _inner(model, part)]
    return models


def _kind(model: type[BaseModel]) -> str | None:
    field = model.model_fields.get("kind")
    return get_args(field.annotation)[0] if field else None


def _inner(model: type[BaseModel], name: str) -> list[type[BaseModel]]:
    field = model.model_fields.get(name)
    return list(models_in(field.annotation)) if field else []


def models_in(annotation: Any) -> Iterator[type[BaseModel]]:
    """The forms inside a type, however deep."""
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        yield annotation
    for argument in get_args(annotation):
        yield from models_in(argument)


def field_description(place: Place) -> str | None:
    """What the form says of a key, as in a new study's comments."""
    if not place or not isinstance(place[-1], str):
        return None
    fields = [model.model_fields.get(place[-1]) for model in models_at(place[:-1])]
    return next((field.description for field in fields if field and field.description), None)
