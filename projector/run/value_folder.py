"""The results folder of `projector value`: tables and a run statement, published by one rename."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from projector.run.publish import publish, write_table
from projector.run.statement import write_statement
from projector.run.value_table import ValueResults


def write_values(results: ValueResults, target: Path, options: dict[str, Any]) -> None:
    """Publishes tables/*.parquet, units and meanings in the schema, and the run statement, written last."""

    def build(folder: Path) -> None:
        (folder / "tables").mkdir()
        columns = results.columns()
        for name, frame in results.tables().items():
            write_table(name, frame, columns[name], folder / "tables" / f"{name}.parquet")
        write_statement(results, folder, options)

    publish(target, build)
