"""One results folder: tables, run statement, and whatever the caller adds, published by one rename."""

from __future__ import annotations

import re
from collections.abc import Callable
from pathlib import Path
from typing import Any

from projector.run.publish import publish, write_tables
from projector.run.results import RunResults
from projector.run.statement import write_statement


def folder_name(study_folder: Path, input_digest: str) -> str:
    """<study>-<first 12 digits of the input digest>, the study by the name of its folder."""
    plain = re.sub(r"[^a-z0-9]+", "_", study_folder.resolve().name.lower()).strip("_") or "study"
    return f"{plain}-{input_digest[:12]}"


def write_results(
    results: RunResults, target: Path, options: dict[str, Any], extras: dict[str, Callable[[Path], None]]
) -> None:
    """Publishes tables/, the extras (file name -> writer) and the run statement, written last."""

    def build(folder: Path) -> None:
        write_tables(results, folder / "tables")
        for name, write in extras.items():
            write(folder / name)
        write_statement(results, folder, options)

    publish(target, build)
