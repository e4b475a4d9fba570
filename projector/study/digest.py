"""The input digest (C15): SHA-256 over the checked tables, typed and in canonical order, and every choice and text.

Row order, file format, comments, line ends and file names do not enter; a changed value, choice or printed text does.
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Iterable
from datetime import date
from typing import Any

import numpy as np
import pandas as pd

from projector.study.columns import Column, Table

LAYOUT = "projector input digest 1"  # changes when the bytes below are laid out otherwise


def input_digest(choices: dict[str, Any], tables: Iterable[tuple[Table, pd.DataFrame]]) -> str:
    """SHA-256 in hex of a study.

    choices  everything study.toml states, as plain values; names of files left out by the caller
    tables   each table's columns with its checked rows in canonical order
    """
    total = hashlib.sha256()
    _add(total, LAYOUT.encode())
    _add(total, json.dumps(_plain(choices), sort_keys=True, ensure_ascii=False, allow_nan=False).encode())
    for table, frame in tables:
        _add(total, table.name.encode())
        for column in table.columns:
            _add(total, f"{column.name} {column.kind}".encode())
            _add(total, column_bytes(column, frame[column.name]))
    return total.hexdigest()


def _add(total: Any, content: bytes) -> None:
    """Adds content behind its own length, so that no two lists of parts give the same bytes."""
    total.update(len(content).to_bytes(8, "little"))
    total.update(content)


def column_bytes(column: Column, values: pd.Series) -> bytes:
    """A column as little-endian numbers, days since 1970, flags, or distinct texts in order and where each stands.

    Empty cells have one form.
    """
    if column.kind == "number":
        numbers = np.where(np.isnan(values.to_numpy(np.float64)), np.nan, values.to_numpy(np.float64) + 0.0)
        return bytes(numbers.astype("<f8").tobytes())
    if column.kind == "whole":
        return bytes(values.to_numpy(np.int64).astype("<i8").tobytes())
    if column.kind == "date":
        return bytes(values.to_numpy().astype("datetime64[D]").astype(np.int64).astype("<i8").tobytes())
    if column.kind == "flag":
        return bytes(values.to_numpy(bool).astype(np.uint8).tobytes())
    codes, distinct = pd.factorize(values, sort=True)
    return "\0".join([str(len(values)), *distinct.tolist()]).encode() + codes.astype("<i8").tobytes()


def _plain(value: Any) -> Any:
    """A choice as JSON holds it: numbers by their exact shortest form, dates as ISO text."""
    if isinstance(value, dict):
        return {key: _plain(inner) for key, inner in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(inner) for inner in value]
    if isinstance(value, date):
        return value.isoformat()
    return value
