"""Year-end asset adequacy projection: callable bonds with issuer-optimal calls against liability streams.

    import projector
    results = projector.run_study("scenarios/harbour_ridge_2022")   # DataFrames with documented columns
    results.measures, results.calls, results.balance, ...

Columns and units: `projector.result_columns()`. Everything heavy is imported when first used.
"""

from __future__ import annotations

from os import PathLike
from pathlib import Path
from typing import TYPE_CHECKING

from projector.study.version import VERSION

if TYPE_CHECKING:
    import pandas as pd

    from projector.run.results import RunResults
    from projector.run.runner import Staged
    from projector.run.value_table import ValueResults

__version__ = VERSION
__all__ = [
    "check_study", "explain_call", "explain_columns", "new_study", "render_report", "result_columns", "run_study",
    "value_columns", "value_study", "value_tables",
]  # fmt: skip


def new_study(folder: str | PathLike[str]) -> None:
    """Writes a commented study folder to start from. Raises StudyRefused when the folder is there and not empty."""
    from projector.study.folder import new_study as write_folder

    write_folder(Path(folder))


def check_study(folder: str | PathLike[str]) -> Staged:
    """Reads and checks a study, calibrates spreads, projects nothing. Raises StudyRefused with every located error."""
    from projector.run.runner import stage

    return stage(Path(folder))


def value_study(folder: str | PathLike[str], required_yield: float | None = None) -> pd.DataFrame:
    """Holdings at the valuation date, one row a security: prices, yields, spreads, durations, odds of a call.

    required_yield  minimum yield, bond-equivalent [1/year]: adds the price that gives it whenever the bond is repaid

    Raises StudyRefused with every located error, ValueError for a required yield that is none. Columns and units:
    `projector.value_columns()`; yields to each call and odds by year: `value_tables`.
    """
    return value_tables(folder, required_yield).holdings


def value_tables(folder: str | PathLike[str], required_yield: float | None = None) -> ValueResults:
    """As `value_study`, with the long tables: `holdings`, `call_yields`, `call_odds`."""
    from projector.run import value_table

    return value_table.value_tables(Path(folder), required_yield)


def value_columns(required_yield: bool = False) -> dict[str, dict[str, tuple[str, str]]]:
    """Tables of `value_tables`: table -> column -> (unit, meaning)."""
    from projector.run import value_columns as listed

    return listed.value_columns(required_yield)


def run_study(folder: str | PathLike[str], threads: int | None = None, block_paths: int | None = None) -> RunResults:
    """The year-end run in memory. Raises StudyRefused, StudyTooLarge or IdentityFailed."""
    from projector.run import runner

    return runner.run_study(Path(folder), threads, block_paths)


def render_report(results: RunResults, run_command: str = "projector run FOLDER") -> str:
    """The reserve-adequacy report as one HTML text."""
    from projector.report import render

    return render.render_report(results, run_command)


def result_columns() -> dict[str, dict[str, tuple[str, str]]]:
    """Result tables: table -> column -> (unit, meaning)."""
    from projector.run.results import COLUMNS

    return COLUMNS


def explain_call(folder: str | PathLike[str], security: str, scenario: str, *, solve_all: bool = False) -> pd.DataFrame:
    """Why one security was or was not called on one path: a row a month up to its call, its maturity or the horizon.

    solve_all  also solve the rights that the bound settled, whose continuation is empty otherwise

    Columns and units: `explain_columns()`. Raises StudyRefused when the study holds no such security or scenario.
    """
    from projector.questions.explain import explain

    return explain(Path(folder), security, scenario, solve_all).months


def explain_columns() -> dict[str, tuple[str, str]]:
    """Columns of `explain_call`: column -> (unit, meaning)."""
    from projector.questions.records import COLUMNS

    return COLUMNS
