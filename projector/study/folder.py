"""A new study folder to start from: every key explained, every choice still to be made, empty tables with headers."""

from __future__ import annotations

import secrets
import shutil
import textwrap
from collections.abc import Iterator
from pathlib import Path
from typing import get_args, get_origin

from pydantic import BaseModel
from pydantic.fields import FieldInfo

from projector.study.cells import figure
from projector.study.columns import OPTIONAL_TABLES, Column, Table, study_tables
from projector.study.errors import echo
from projector.study.files import STUDY_FILE, refused
from projector.study.schema import Sourced, StudyForm, TablesSection
from projector.study.tomlfile import FILL_IN, models_in

TABLES = study_tables("net_annual_cost")
_HEAD = f"""\
# A study: all inputs of one valuation. Replace every "{FILL_IN}"; check lists what is left.
# No actuarial choice has a default. Texts, choices and names stand in quotes; numbers and dates do not.
# Rates are decimals per year (0.05 is 5 %), prices per 100 of par, amounts in currency units,
# spreads in basis points where the name ends in _bp, dates YYYY-MM-DD.
# Every assumption says where it came from: source, as_of, rationale. The report prints them.
"""
_OTHER_PATHS = """\
# Further sources of paths, each optional, in the order of the report:
# [[rates.paths]]
# kind = "shift_table"
# file = "shifts.csv"        # title, year, tenor_months, shift
# within_year = "linear"     # or year_end_steps
# [[rates.paths]]
# kind = "history"
# file = "history.csv"       # title, month, tenor_months, rate
# replay = "changes"         # or levels
# [[rates.paths]]
# kind = "imported"
# file = "paths.parquet"     # scenario, month, tenor_months, rate
"""


def new_study(folder: Path) -> None:
    """Writes a study folder to start from: study.toml with every key explained, and empty tables.

    The folder must not exist, or be empty. It appears whole or not at all.
    """
    folder = Path(folder)
    _require_free(folder)
    beside = folder.parent / f".{folder.name}.{secrets.token_hex(4)}"
    try:
        beside.mkdir()
        for name, text in new_files().items():
            (beside / name).write_text(text, encoding="utf-8", newline="\n")
        if folder.is_dir():
            folder.rmdir()
        beside.rename(folder)
    except OSError as problem:
        reason = problem.strerror or "it cannot be written"
        raise refused("E113", echo(str(folder)), f"the new study was not written: {reason}", "name another") from None
    finally:
        shutil.rmtree(beside, ignore_errors=True)


def _require_free(folder: Path) -> None:
    name = echo(str(folder))
    if not folder.resolve().parent.is_dir():
        raise refused("E113", name, "the folder around the new study is not there", "make it first, or name another")
    taken = folder.is_symlink() or (folder.exists() and (not folder.is_dir() or any(folder.iterdir())))
    if taken:
        raise refused("E113", name, "there is something of this name already", "name a folder that is new or empty")


def new_files() -> dict[str, str]:
    """The files of a new study by name."""
    headers = {
        f"{name}.csv": ",".join(column.name for column in table.columns) + "\n" for name, table in TABLES.items()
    }
    return {STUDY_FILE: new_study_toml(), **headers}


def new_study_toml() -> str:
    """study.toml with every key and its explanation; what must be stated is left to fill in."""
    lines = [_HEAD]
    for name, field in StudyForm.model_fields.items():
        model = next(models_in(field.annotation))
        section = _section_lines(name, model, repeated=get_origin(field.annotation) is list)
        lines.append(f"# {field.description}")
        lines += section if field.is_required() else (f"# {line.removeprefix('# ')}" for line in section)
        lines.append(_OTHER_PATHS if name == "rates" else "")
    return "\n".join([*lines, *_table_lines()]) + "\n"


def _section_lines(name: str, model: type[BaseModel], repeated: bool) -> Iterator[str]:
    """A section: its own keys, then where the assumption came from, then the sections inside it."""
    yield f"[[{name}]]" if repeated else f"[{name}]"
    fields = sorted(model.model_fields.items(), key=lambda item: item[0] in Sourced.model_fields)
    for key, field in fields:
        if not any(models_in(field.annotation)):
            yield _key_line(key, field, model)
    for key, field in fields:
        for inner in list(models_in(field.annotation))[:1]:
            yield f"# {field.description}"
            yield from _section_lines(f"{name}.{key}", inner, repeated=True)


def _key_line(key: str, field: FieldInfo, model: type[BaseModel]) -> str:
    comment = f"  # {field.description}" if field.description else ""
    if model is TablesSection and field.is_required():
        return f'{key} = "{key}.csv"{comment}'
    if not field.is_required():
        return f"# {key} = {_default_text(field)}{comment}, optional"
    choices = get_args(field.annotation)
    if len(choices) == 1 and isinstance(choices[0], str):  # nothing to choose in this version
        return f'{key} = "{choices[0]}"{comment}'
    return f'{key} = "{FILL_IN}"{comment}'


def _default_text(field: FieldInfo) -> str:
    default = field.get_default(call_default_factory=True)
    if isinstance(default, int):
        return str(default)
    if default is None:
        return '"..."'
    return '["..."]' if isinstance(default, list) else f'"{default or "..."}"'


def _table_lines() -> Iterator[str]:
    """The tables, their columns and units, as a comment at the end of study.toml."""
    yield "# The tables, one column a line: name [unit] meaning. A column in (brackets) may be left out."
    for name, table in TABLES.items():
        yield "#"
        yield f"# {name}: {table.meaning}"
        yield from (f"#   {_column_text(column)}" for column in table.columns)
        yield from _refused_text(table)
    yield "#"
    yield "# Optional tables, for securities with such terms; name the file in [tables] to have it read."
    for name, table in OPTIONAL_TABLES.items():
        yield "#"
        yield f"# {name}: {table.meaning}"
        yield from (f"#   {_column_text(column)}" for column in table.columns)
    yield "#"
    yield '# With defaults.form = "rate_recovery_lag" default_costs has rating, annual_rate [1/year] and recovery [-].'


def _column_text(column: Column) -> str:
    shown = column.name if column.present else f"({column.name})"
    gaps = "" if column.filled else "; may be empty"
    choices = f"; one of {', '.join(column.choices)}" if column.choices else ""
    ranged = column.least is not None and column.most is not None
    limits = f"; {figure(column.least or 0)} to {figure(column.most or 0)}" if ranged else ""
    text = f"{shown} [{column.unit}] {column.meaning}{limits}{choices}{gaps}"
    return "\n#       ".join(textwrap.wrap(text, 110, break_on_hyphens=False))


def _refused_text(table: Table) -> Iterator[str]:
    if table.refused:
        names = ", ".join(column.name for column in table.refused)
        yield f"#   not honoured by this version, accepted only while empty or 0: {names}"
