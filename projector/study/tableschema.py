"""The study's tables as Table Schema (Data Package 2.0), from the same list that the checks read."""

from __future__ import annotations

from typing import Any

from projector.study.columns import DEFAULT_COSTS, OPTIONAL_TABLES, RATE_TABLES, Column, Table, study_tables
from projector.study.names import TEXT_AT_MOST

_TYPES = {"number": "number", "whole": "integer", "date": "date", "flag": "boolean"}  # others: string


def table_schemas() -> dict[str, dict[str, Any]]:
    """The schema of each table by its name; default_costs once for each form of default."""
    named: dict[str, Table] = dict(study_tables("net_annual_cost"))
    del named["default_costs"]
    named |= {f"default_costs {form}": table for form, table in DEFAULT_COSTS.items()}
    return {name: _schema(table) for name, table in (named | OPTIONAL_TABLES | RATE_TABLES).items()}


def _schema(table: Table) -> dict[str, Any]:
    return {
        "$schema": "https://datapackage.org/profiles/2.0/tableschema.json",
        "description": table.meaning,
        "fields": [_field(column, table) for column in table.columns],
        "primaryKey": list(table.key),
        "missingValues": [""],
    }


def _field(column: Column, table: Table) -> dict[str, Any]:
    constraints: dict[str, Any] = {"required": column.filled}
    if table.key == (column.name,):
        constraints["unique"] = True
    if column.least is not None:
        constraints["exclusiveMinimum" if column.above_least else "minimum"] = column.least
    if column.most is not None:
        constraints["maximum"] = column.most
    if column.choices:
        constraints["enum"] = list(column.choices)
    if column.kind in ("text", "identifier"):
        constraints["maxLength"] = TEXT_AT_MOST
    if column.kind == "identifier":
        constraints["pattern"] = "[a-z][a-z0-9_]*"
    flags = {"trueValues": ["true", "TRUE"], "falseValues": ["false", "FALSE"]} if column.kind == "flag" else {}
    return {
        "name": column.name,
        "type": _TYPES.get(column.kind, "string"),
        "description": f"{column.meaning} [{column.unit}]",
        **flags,
        "constraints": constraints,
    }
