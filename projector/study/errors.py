"""Located errors: what a stranger needs to mend an input, and nothing she does not.

Rooms above add their own checks as functions that return the same records; a stage collects all of them and
raises once.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, replace
from typing import TypeVar

SHOWN_AT_MOST = 20
ECHO_AT_MOST = 80
Found = TypeVar("Found")


@dataclass(frozen=True, kw_only=True)
class LocatedError:
    """One fault in the input. `row` is the line as the user counts it: the header is row 1."""

    code: str  # E1nn files, E2nn study file, E3nn tables, E4nn across tables, E5nn the engine cannot honour it yet
    file: str
    problem: str  # what is wrong, as a clause without a full stop
    remedy: str  # what is allowed and what to do
    row: int | None = None
    column: str | None = None
    value: str | None = None
    sheet: str | None = None
    more: int = 0  # further faults of the same code, file and column that have no record of their own

    def sentence(self) -> str:
        """The error as one line of text."""
        where = [self.file]
        if self.sheet:
            where.append(f"sheet {self.sheet}")
        if self.row is not None:
            where.append(f"row {self.row}")
        if self.column:
            where.append(f"column {self.column}")
        found = f" (found {echo(self.value)})" if self.value is not None else ""
        return f"{self.code} {', '.join(where)}: {self.problem}{found}; {self.remedy}."


def echo(value: str) -> str:
    """A value as it may be shown: quoted, printable, at most 80 characters."""
    printable = "".join(ch if ch.isprintable() else "?" for ch in value)
    cut = printable if len(printable) <= ECHO_AT_MOST else printable[: ECHO_AT_MOST - 3] + "..."
    return f"'{cut}'"


def first_errors(found: Sequence[Found], make: Callable[[Found], LocatedError], known: int = 0) -> list[LocatedError]:
    """Errors for the first twenty of the faults, the last of them with the count of the rest.

    found  what was found, of one code in one column
    known  further faults of the same kind that are counted but not in `found`
    """
    errors = [make(fault) for fault in found[:SHOWN_AT_MOST]]
    more = len(found) - len(errors) + known
    return [*errors[:-1], replace(errors[-1], more=errors[-1].more + more)] if errors and more else errors


class StudyRefused(Exception):
    """The input cannot be used; every fault of the stage is inside. Exit code 2 (or 4 when it is too large)."""

    exit_code = 2

    def __init__(self, errors: Iterable[LocatedError]) -> None:
        self.errors = tuple(errors)
        super().__init__(self.text())

    def text(self) -> str:
        """Every error, one a line, the same code in the same file and column counted after the first twenty."""
        shown: list[str] = []
        hidden: dict[tuple[str, str, str | None], int] = {}
        seen: dict[tuple[str, str, str | None], int] = {}
        for error in self.errors:
            key = (error.code, error.file, error.column)
            seen[key] = seen.get(key, 0) + 1
            if seen[key] <= SHOWN_AT_MOST:
                shown.append(error.sentence())
            else:
                hidden[key] = hidden.get(key, 0) + 1
            if error.more:
                hidden[key] = hidden.get(key, 0) + error.more
        for (code, file, column), count in hidden.items():
            place = f"{file}, column {column}" if column else file
            shown.append(f"{code} {place}: {count} more of the same.")
        return "\n".join(shown)


class StudyTooLarge(StudyRefused):
    """A stated limit would be passed; the arithmetic stands in the error. Exit code 4."""

    exit_code = 4


class IdentityFailed(Exception):
    """A sum that must hold does not: no report is written. Exit code 3."""

    exit_code = 3
