"""What a page is made of: cells with addresses, tables, charts, and fields that say what they are.

A cell keeps its full value, its unit, its stable key and its formula beside the text that is printed, so that the
page, the workbook and the list of addresses cannot disagree.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field

from markupsafe import Markup

from projector.report.numbers import NOT_AVAILABLE, as_number

LONG_TABLE = 500  # rows; longer ones print their largest lines and leave the rest to the workbook
LARGEST_SHOWN = 25
LONG_WORDS = 22  # letters; longer cells and row names may break into lines
LONG_NAME = 40
ADDING_NOTE = "Items may not add to totals because of rounding."


def told(help: str, unit: str = "-") -> dict[str, str]:
    """What a field is and in which unit: the metadata of every field of a context record."""
    return {"help": help, "unit": unit}


@dataclass(frozen=True, kw_only=True)
class Cell:
    """One cell: what is printed, and what stands behind it."""

    shown: str = field(metadata=told("the printed text"))
    value: float | str = field(metadata=told("the full value, or the word", "as `unit` says"))
    unit: str = field(metadata=told("unit of the full value; - for words"))
    key: str = field(metadata=told("stable key: outlives a re-ordered table"))
    formula: str = field(metadata=told("formula id of section 7; empty for words and inputs"))
    look: str = field(metadata=told("number, word, quiet (nothing there) or study (the study's own words)"))
    scale: float = field(metadata=told("full value per printed unit", "as `unit` says"))
    style: str = field(metadata=told("workbook format: one, two, four, whole, percent, percent_two or text"))

    @property
    def negative(self) -> bool:
        """Whether the printed figure is below zero."""
        return self.look == "number" and self.shown.startswith("\u2212")

    @property
    def css(self) -> str:
        """The classes of the printed cell; only long words may break."""
        long = " long" if len(self.shown) > LONG_WORDS else ""
        return {"number": "neg" if self.negative else "", "quiet": f"w quiet{long}"}.get(self.look, f"w{long}")


@dataclass(frozen=True, kw_only=True)
class Row:
    """One line: its name and its cells; a total is marked and named so."""

    name: str
    cells: tuple[Cell, ...]
    total: bool = False
    own_words: bool = False  # the name is text of the study
    anchor: str = ""  # a further link target of the line

    @property
    def long(self) -> bool:
        """Whether the name may break into lines."""
        return len(self.name) > LONG_NAME


@dataclass(frozen=True, kw_only=True)
class Column:
    """One column; the unit is named where it differs from the caption's."""

    name: str
    unit: str = ""
    words: bool = False
    adds: bool = False  # items of this column add to the total row


@dataclass(frozen=True, kw_only=True)
class Table:
    """A numbered table. Lines and columns count from 1; the row name has no column number."""

    number: str
    caption: str
    basis: str  # unit, what is included, sign, discounting, date, source
    row_head: str
    columns: tuple[Column, ...]
    rows: tuple[Row, ...]
    notes: tuple[str, ...] = ()
    why_missing: str = ""  # the reason for every [n/a] in the table
    most_columns: int = 8  # more are printed as a further piece below
    prose: bool = False  # cells are sentences
    rest: str = ""  # where the rest of a long table is, with its control total

    def __post_init__(self) -> None:
        wrong = [row.name for row in self.rows if len(row.cells) != len(self.columns)]
        if wrong:
            raise ValueError(f"table {self.number}: rows with another number of cells than columns: {wrong[:3]}")
        if self.has_missing and not self.why_missing:
            raise ValueError(f"table {self.number} prints {NOT_AVAILABLE} without a reason")

    @property
    def has_missing(self) -> bool:
        """Whether a cell has no figure."""
        return any(cell.shown == NOT_AVAILABLE for row in self.rows for cell in row.cells)

    @property
    def printed_rows(self) -> tuple[Row, ...]:
        """All rows, or the first of a table too long for the page (the maker puts the largest first)."""
        return self.rows if len(self.rows) <= LONG_TABLE else self.rows[:LARGEST_SHOWN]

    @property
    def pieces(self) -> tuple[range, ...]:
        """Column ranges, each printed as one table; column numbers run on."""
        count, most = len(self.columns), self.most_columns
        return tuple(range(lo, min(lo + most, count)) for lo in range(0, count, most))

    @property
    def short(self) -> bool:
        """Short enough to be kept on one printed page."""
        return len(self.printed_rows) <= 15

    @property
    def css(self) -> str:
        """The classes of the printed table."""
        return " ".join(name for name, on in (("short", self.short), ("prose", self.prose)) if on)

    def address(self, line: int, column: int) -> str:
        """`T1.1.7.1`: table 1.1, line 7, column 1 (both counted from 1)."""
        return f"T{self.number}.{line}.{column}"

    def addressed(self) -> Iterator[tuple[str, Row, Column, Cell]]:
        """Every cell with its address, in reading order."""
        for line, row in enumerate(self.rows, start=1):
            for column, (head, cell) in enumerate(zip(self.columns, row.cells), start=1):
                yield self.address(line, column), row, head, cell

    @property
    def note_on_adding(self) -> str:
        """The note on rounding, exactly where printed items do not add to their printed total."""
        return ADDING_NOTE if any(self._misses(j) for j, column in enumerate(self.columns) if column.adds) else ""

    def _misses(self, column: int) -> bool:
        items = [as_number(row.cells[column].shown) for row in self.rows if not row.total]
        totals = [as_number(row.cells[column].shown) for row in self.rows if row.total]
        return any(sum(items) != total for total in totals)


@dataclass(frozen=True, kw_only=True)
class Chart:
    """A numbered chart: its picture, and the words that serve the same purpose."""

    number: str = field(metadata=told("chart number"))
    title: str = field(metadata=told("the finding, by a tested rule"))
    subtitle: str = field(metadata=told("measure, unit, period and basis"))
    text: str = field(metadata=told("the text alternative, 60 to 500 characters, naming the table with the numbers"))
    svg: Markup = field(metadata=told("the drawing"))


def rows_with_total(rows: Sequence[Row], total: Row) -> tuple[Row, ...]:
    """The items, then their total."""
    return (*rows, total)
