"""From results to the page: one self-contained HTML file, and the address of every number in it.

The page is a function of the results and the command that made them: no clock, no machine, no version enters.
"""

from __future__ import annotations

from functools import cache

import pandas as pd
from jinja2 import Environment, PackageLoader, StrictUndefined
from markupsafe import Markup

from projector.report.context.page import Page, page
from projector.report.numbers import clean, closed
from projector.run.results import RunResults

ADDRESS_COLUMNS = ("address", "table", "line", "column", "row_name", "column_name", "shown", "value", "word", "unit",
                   "key", "formula")  # fmt: skip


def render_report(results: RunResults, run_command: str) -> str:
    """The report as one HTML text; the same results and command give the same text in every process."""
    return rendered(page(results, run_command))


def rendered(context: Page) -> str:
    """The page of a context already built."""
    return _environment().get_template("report.html.j2").render(page=context)


def addresses(results: RunResults, run_command: str = "") -> pd.DataFrame:
    """Every printed number: address, stable key, formula id, full value, unit.

    `value` is the full figure in `unit` (empty for words, which stand in `word`); it rounds to `shown`.
    """
    return addresses_of(page(results, run_command))


def addresses_of(context: Page) -> pd.DataFrame:
    """The addresses of a context already built."""
    rows = []
    for table in context.tables():
        for address, row, column, cell in table.addressed():
            _, line, place = address.rsplit(".", 2)
            number = cell.value if isinstance(cell.value, float) else None
            word = cell.value if isinstance(cell.value, str) else ""
            rows.append((address, table.number, int(line), int(place), row.name, column.name, cell.shown, number, word,
                         cell.unit, cell.key, cell.formula))  # fmt: skip
    frame = pd.DataFrame(rows, columns=list(ADDRESS_COLUMNS))
    return frame.astype({"value": "float64"})


@cache
def _environment() -> Environment:
    environment = Environment(
        loader=PackageLoader("projector.report", "templates"), autoescape=True, undefined=StrictUndefined,
        trim_blocks=True, lstrip_blocks=True, keep_trailing_newline=True, finalize=_printable,
    )  # fmt: skip
    environment.filters["css_text"] = css_text
    environment.filters["closed"] = closed
    return environment


def _printable(value: object) -> object:
    """Text without letters that no page may hold; markup of our own is left alone."""
    return clean(value) if isinstance(value, str) and not isinstance(value, Markup) else value


def css_text(text: str) -> Markup:
    """Text as a CSS string: every letter that could end the string or the style block is written as its number."""
    safe = "".join(c if c.isascii() and (c.isalnum() or c in " .,:-") else f"\\{ord(c):06x} " for c in text)
    return Markup(f'"{safe}"')
