"""Checks across tables: names that must exist elsewhere, ratings that need a spread and a cost, ledger totals."""

from __future__ import annotations

import math
from collections.abc import Iterable
from functools import partial
from typing import Any

import pandas as pd

from projector.study.cells import plain_text
from projector.study.columns import ALL
from projector.study.errors import LocatedError
from projector.study.names import listed, nearest
from projector.study.tablecheck import row_errors

MONEY_TO = 0.005  # [currency]
BOOK_SHARE_OF_PAR = (0.2, 2.0)


def lot_errors(
    lots: pd.DataFrame, securities: pd.DataFrame, segments: tuple[str, ...], file: str
) -> list[LocatedError]:
    """Every lot has a security and a segment, and values that are not far from its par."""
    at = partial(row_errors, lots, file=file)
    errors = at(
        ~lots["security_id"].isin(securities["security_id"]),
        code="E401",
        column="security_id",
        problem="lot {lot_id} is of a security that is not in the securities table",
        remedy="add the security there, or correct the security_id",
    )
    errors += segment_errors(lots, segments, file)
    least, most = BOOK_SHARE_OF_PAR
    for column in ("book_value", "tax_basis"):
        share = lots[column] / lots["par"]
        errors += at(
            (share < least) | (share > most),
            code="E408",
            column=column,
            problem=f"{column} of lot {{lot_id}} is not between 20 % and 200 % of its par {{par}}",
            remedy="correct one of the two amounts: both are in currency units",
        )
    return errors


def segment_errors(frame: pd.DataFrame, segments: Iterable[str], file: str) -> list[LocatedError]:
    """Every segment named in a table is one of study.toml's."""
    known = tuple(segments)

    def remedy(row: dict[str, Any]) -> str:
        close = nearest(str(row["segment"]), known)
        meant = f"did you mean {close}?" if close else "add it to study.toml, or correct the name:"
        return f"{meant} The segments are {listed(known)}"

    return row_errors(
        frame,
        ~frame["segment"].isin(known),
        code="E402",
        file=file,
        column="segment",
        problem="this segment is not in study.toml",
        remedy=remedy,
    )


def rating_errors(
    used: pd.DataFrame,
    bought: tuple[tuple[str, str], ...],
    listed_ratings: Iterable[str],
    *,
    code: str,
    file: str,
    what: str,
) -> list[LocatedError]:
    """Every rating in use has a row in an assumption table.

    used            securities, checked
    bought          (class name, rating) of the purchase classes
    listed_ratings  ratings of the assumption table `file`
    what            what the table gives, such as "class spread"
    """
    have = set(listed_ratings)
    counts = used["rating"].value_counts().to_dict()
    by_rating = {str(rating): [f"{count} securities"] for rating, count in counts.items()}
    for name, rating in bought:
        by_rating.setdefault(rating, []).append(f"purchase class {name}")
    return [
        LocatedError(
            code=code,
            file=file,
            column="rating",
            value=rating,
            problem=f"this rating has no {what}; it is used by {listed(users)}",
            remedy="add rows for it",
        )
        for rating, users in sorted(by_rating.items())
        if rating not in have
    ]


def control_errors(
    controls: pd.DataFrame, totals: pd.DataFrame, segments: tuple[str, ...], file: str
) -> list[LocatedError]:
    """The ledger's totals tie to the tables: counts exactly, money to 0.005.

    totals  one row for each segment, and one column for each item that this floor can total
    """
    errors = segment_errors(controls, (*segments, ALL), file)
    for row in controls.to_dict("records"):
        item, segment, amount = str(row["item"]), str(row["segment"]), float(row["amount"])
        if item in totals.columns and segment in (*segments, ALL):
            found = math.fsum(totals[item] if segment == ALL else totals.loc[[segment], item])
            if abs(found - amount) > (0.0 if item == "lots_count" else MONEY_TO * (1 + 1e-9)):
                errors.append(_not_tied(file, int(row["row"]), item, segment, amount, found))
    return errors + _missing_controls(controls, segments, file)


def _not_tied(file: str, row: int, item: str, segment: str, amount: float, found: float) -> LocatedError:
    over = "all segments" if segment == ALL else f"segment {segment}"
    places = 0 if item == "lots_count" else 2
    gap = found - amount
    shown = f"{gap:+,.{places}f}" if abs(gap) >= 0.01 or places == 0 else f"{gap:+.4f}"
    return LocatedError(
        code="E430",
        file=file,
        row=row,
        column="amount",
        value=plain_text(amount),
        problem=f"{item} of {over} does not tie: the tables give {found:,.{places}f}, {shown} against the ledger",
        remedy="find the difference before running; nothing is scaled to fit",
    )


def _missing_controls(controls: pd.DataFrame, segments: tuple[str, ...], file: str) -> list[LocatedError]:
    errors = []
    for item in ("par", "book_value", "reserve_statutory"):
        have = set(controls["segment"][controls["item"] == item])
        lacking = [segment for segment in segments if segment not in have]
        if ALL not in have and lacking:
            where = "" if len(lacking) == len(segments) else f" for {listed(lacking)}"
            errors.append(
                LocatedError(
                    code="E431",
                    file=file,
                    column="item",
                    value=item,
                    problem=f"this control total is missing{where}",
                    remedy="add it for all, or for every segment",
                )
            )
    return errors
