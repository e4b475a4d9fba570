"""A Parquet file as columns of cells: numbers stay numbers, all else becomes the text a CSV file would hold."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
from numpy.typing import NDArray

from projector.study.cells import plain_text
from projector.study.errors import LocatedError, StudyRefused
from projector.study.files import InputFile, Limits, refused, too_large
from projector.study.names import shown

LARGE_REMEDY = "drop what the run does not need, or split the study"
_OUTSIDE = "a day outside the calendar"  # no date, so that the date's own check refuses it at its row
_PLAIN_KINDS = (
    *(pa.types.is_floating, pa.types.is_integer, pa.types.is_decimal, pa.types.is_boolean, pa.types.is_null),
    *(pa.types.is_string, pa.types.is_large_string, pa.types.is_string_view),
    *(pa.types.is_date, pa.types.is_timestamp),
)
_BYTE_KINDS = (pa.types.is_binary, pa.types.is_large_binary, pa.types.is_fixed_size_binary, pa.types.is_binary_view)
Parts = tuple[tuple[str, ...], tuple[NDArray[Any], ...], frozenset[str]]


def read_parquet(file: InputFile, limits: Limits, require_size: Callable[[str, int, int, int, Limits], None]) -> Parts:
    """Header, columns, and the names of the columns that are floating-point numbers.

    require_size  refuses a table by its rows, columns and cells, before it is read
    """
    try:
        source = pq.ParquetFile(pa.BufferReader(file.content))
        meta = source.metadata
        require_size(file.name, meta.num_rows, meta.num_columns, meta.num_rows * meta.num_columns, limits)
        unpacked = sum(meta.row_group(at).total_byte_size for at in range(meta.num_row_groups))
        if unpacked > limits.unpacked_bytes:
            raise too_large("E110", file.name, "bytes unpacked", unpacked, limits.unpacked_bytes, LARGE_REMEDY)
        schema = source.schema_arrow
        _require_plain(file.name, schema)
        texts = [name for name, kind in zip(schema.names, schema.types) if pa.types.is_string(kind)]
        frame = pq.read_table(pa.BufferReader(file.content), read_dictionary=texts)
        columns = tuple(_cells(file.name, name, column) for name, column in zip(frame.column_names, frame.columns))
    except (pa.ArrowException, OSError, ValueError, NotImplementedError) as problem:
        reason = shown(problem) or type(problem).__name__
        remedy = "write it again as a plain table of texts, numbers, dates and flags"
        raise refused("E108", file.name, f"this is not a Parquet file that can be read: {reason}", remedy) from None
    floating = (name for name, kind in zip(schema.names, schema.types) if pa.types.is_floating(_inner(kind)))
    return tuple(frame.column_names), columns, frozenset(floating)


def _inner(kind: Any) -> Any:
    return kind.value_type if pa.types.is_dictionary(kind) else kind


def _require_plain(file: str, schema: Any) -> None:
    """Refuses columns of lists, structures, durations and the like: their text is nobody's spelling."""
    errors = [
        _column_error(file, name, f"the column is of the type {shown(kind)}")
        for name, kind in zip(schema.names, schema.types)
        if not any(is_kind(_inner(kind)) for is_kind in (*_PLAIN_KINDS, *_BYTE_KINDS))
    ]
    if errors:
        raise StudyRefused(errors)


def _column_error(file: str, name: str, problem: str) -> LocatedError:
    remedy = "write it as a column of texts, numbers, dates or flags"
    return LocatedError(code="E322", file=file, column=shown(name) or None, problem=problem, remedy=remedy)


def _cells(file: str, name: str, column: Any) -> NDArray[Any]:
    """A column as numbers where it is numeric without gaps, else as text."""
    kind = column.type
    if pa.types.is_floating(kind) or pa.types.is_integer(kind):
        if column.null_count == 0:
            return np.asarray(column.to_numpy())
        return np.array([plain_text(value) for value in column.to_pylist()], dtype=object)
    if any(is_kind(_inner(kind)) for is_kind in _BYTE_KINDS):
        column = _decoded(file, name, column)
    if pa.types.is_dictionary(column.type):
        whole = column.combine_chunks()
        parts = whole.chunks if isinstance(whole, pa.ChunkedArray) else [whole]
        return np.concatenate([_dictionary_cells(part) for part in parts]) if parts else np.array([], dtype=object)
    return np.array(_texts(column), dtype=object)


def _decoded(file: str, name: str, column: Any) -> Any:
    """Bytes as the UTF-8 text they are, or refused."""
    try:
        return pa.chunked_array(
            [_plain(part).cast(pa.binary()).cast(pa.string()) for part in column.chunks], pa.string()
        )
    except pa.ArrowInvalid:
        problem = "the column holds bytes that are not UTF-8 text"
        raise StudyRefused([_column_error(file, name, problem)]) from None


def _plain(part: Any) -> Any:
    return part.dictionary_decode() if pa.types.is_dictionary(part.type) else part


def _texts(values: Any) -> list[str]:
    """Values as texts; a time that no calendar of ours has is one that no date's check lets through."""
    try:
        return [plain_text(value) for value in values.to_pylist()]
    except (OverflowError, ValueError, LookupError):
        if not (pa.types.is_timestamp(values.type) or pa.types.is_date(values.type)):
            raise
        return [_text(value) for value in values]


def _text(value: Any) -> str:
    try:
        return plain_text(value.as_py())
    except (OverflowError, ValueError, LookupError):
        return _OUTSIDE


def _dictionary_cells(part: Any) -> NDArray[Any]:
    words = np.array([*_texts(part.dictionary), ""], dtype=object)
    places = part.indices.fill_null(len(words) - 1).to_numpy(zero_copy_only=False)
    return words[places]
