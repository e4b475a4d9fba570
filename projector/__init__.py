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

__version__ = VERSION
__all__ = [
    "check_study", "explain_call", "explain_columns", "new_study", "render_report", "result_columns", "run_study",
]  # fmt: skip


def new_study(folder: str | PathLike[str]) -> None:
    """Writes a commented study folder to start from. Raises StudyRefused when the folder is there and not empty."""
    from projector.study.folder import new_study as write_folder

    write_folder(Path(folder))


def check_study(folder: str | PathLike[str]) -> Staged:
    """Reads and checks a study, calibrates spreads, projects nothing. Raises StudyRefused with every located error."""
    from projector.run.runner import stage

    return stage(Path(folder))


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
