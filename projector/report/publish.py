"""Everything the report leaves in a results folder, from one building of its context."""

from __future__ import annotations

from dataclasses import dataclass

import pandas as pd

from projector.report.context.page import page
from projector.report.render import addresses_of, rendered
from projector.report.workbook import tables_to_bytes
from projector.run.results import RunResults


@dataclass(frozen=True)
class Published:
    """The page as text, the workbook as bytes, and the address of every number in both."""

    html: str
    workbook: bytes
    addresses: pd.DataFrame


def published(results: RunResults, run_command: str) -> Published:
    """Page, workbook and addresses; all three are functions of the results and the command alone."""
    context = page(results, run_command)
    return Published(rendered(context), tables_to_bytes(context, results), addresses_of(context))
