"""The sums that stop a run: they hold, and each catches a fault planted in what was recorded, saying where."""

from __future__ import annotations

import sys
from collections.abc import Callable
from copy import copy
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from projector import cli
from projector.run import runner
from projector.run.block import BlockResult, project
from projector.run.identities import check_identities
from projector.study.errors import IdentityFailed

CODES = ["I1", "I2", "I3", "I4", "I5", "I9", "I10", "I11"]
M, S, P = 14, 1, 2  # the cell of the planted faults: month 14, second segment, third path
WHERE = "S3, life, month 14"


def altered(block: BlockResult, field: str, key: Any, change: Callable[[np.ndarray], None]) -> BlockResult:
    """A copy of a block with one array changed."""
    out, table = copy(block), dict(getattr(block, field))
    table[key] = table[key].copy()
    change(table[key])
    setattr(out, field, table)
    return out


def more(amount: float, cell: tuple[Any, ...] = (M, S, P)) -> Callable[[np.ndarray], None]:
    """Adds an amount at one cell."""

    def change(array: np.ndarray) -> None:
        array[cell] += amount

    return change


def refusal(prepared: Any, block: BlockResult) -> dict[str, str]:
    """What the refusal says, by identity."""
    with pytest.raises(IdentityFailed) as refused:
        check_identities(prepared, [block])
    first, *lines = str(refused.value).split("\n")
    assert first == "sums that must hold do not; no report was written:"
    return {line.split()[0]: line for line in lines}


@pytest.mark.parametrize("study", ["hand", "busy"])
def test_limit_every_identity_holds_and_says_how_much_it_compared(request: Any, study: str) -> None:
    staged, block = request.getfixturevalue(study), request.getfixturevalue(f"{study}_block")
    table = check_identities(staged.prepared, [block])
    assert table["identity"].tolist() == CODES
    assert table["holds"].all()
    segments, paths = block.balances["cash"].shape[1:]
    cells = {
        "I3": 25 * segments * paths,
        "I5": len(staged.prepared.bonds.ids),
        "I9": segments * paths,
        "I11": 25 * segments * paths,
    }
    assert dict(zip(table["identity"], table["checked"])) == {c: cells.get(c, 24 * segments * paths) for c in CODES}
    assert (table["worst_difference"] < 1e-6).all()


def test_order_identities_are_the_same_over_one_block_and_over_several(busy: Any, busy_block: Any) -> None:
    one = check_identities(busy.prepared, [busy_block])
    several = check_identities(busy.prepared, [project(busy.prepared, lo, lo + 1) for lo in range(7)])
    assert several["checked"].tolist() == one["checked"].tolist()
    assert several["worst_difference"].tolist() == one["worst_difference"].tolist()


# each fault is seen by the identity named first; what else it breaks is stated too
FAULTS = [
    ("I1", "flows", ("start", "coupon"), 0.01, {"I9"}),
    ("I1", "flows", ("segment", "premium"), 0.01, {"I9", "I10"}),
    ("I1", "balances", "cash", 0.01, {"I10"}),
    ("I1", "flows", ("segment", "cash_interest"), 0.01, {"I10"}),
    ("I2", "par", "sold", 0.01, set()),
    ("I2", "par", "bought", -0.01, set()),
    ("I2", "par", "defaulted", 0.01, set()),
    ("I3", "balances", "recoveries", 0.01, {"I10"}),
    ("I3", "book", "recoverable", 0.01, set()),
    ("I4", "book", "accretion", 0.01, {"I10"}),
    ("I4", "book", "defaulted", 0.01, set()),
    ("I4", "balances", "statement_bought", 0.01, {"I10"}),
    ("I9", "flows", ("bought", "coupon"), 0.01, {"I1"}),
    ("I10", "balances", "accrued", 0.01, set()),
    ("I10", "balances", "interest_earned", 0.01, set()),
    ("I10", "balances", "default_cost", 0.01, set()),
    ("I10", "book", "sold_accrued", 0.01, set()),
]


@pytest.mark.parametrize(("code", "field", "key", "amount", "others"), FAULTS)
def test_limit_a_cent_planted_anywhere_is_caught_and_located(
    busy: Any, busy_block: Any, code: str, field: str, key: Any, amount: float, others: set[str]
) -> None:
    said = refusal(busy.prepared, altered(busy_block, field, key, more(amount)))
    assert set(said) == {code, *others}
    for found, line in said.items():
        place = "S3, life, month 0" if found == "I9" else WHERE
        if found in ("I10", "I1", "I2", "I4") and field == "balances":
            # a balance is in two months: the larger difference of equals stands in either
            assert any(f"at S3, life, month {m}, allowed" in line for m in (M, M + 1)), line
        elif found == "I3" and key == "recoverable":
            assert "S3, life, month " in line  # it adds up over the months after it
        else:
            assert f"at {place}, allowed" in line, line


def test_known_a_refusal_is_a_whole_sentence(busy: Any, busy_block: Any) -> None:
    said = refusal(busy.prepared, altered(busy_block, "par", "sold", more(0.25)))
    assert said["I2"] == (
        "I2 par: opening - redeemed - called - sold - defaulted + bought = closing: difference 0.25 at S3, life,"
        " month 14, allowed 1e-9 x sum of absolute terms + 0.000001"
    )


def test_limit_a_closing_balance_of_the_horizon_is_seen_by_the_value_identity(busy: Any, busy_block: Any) -> None:
    said = refusal(busy.prepared, altered(busy_block, "balances", "cash", more(1.0, (24, S, P))))
    assert set(said) == {"I1", "I9", "I10"}


def test_limit_a_wrong_short_rate_is_seen_by_the_value_identity(busy: Any, busy_block: Any) -> None:
    cash = busy_block.balances["cash"][:-1, :, P]
    m = int(np.argmax(cash.max(axis=1))) + 1  # the month that opens with most cash
    block = copy(busy_block)
    block.short_rate = busy_block.short_rate.copy()
    block.short_rate[m, P] += 1e-4
    assert set(refusal(busy.prepared, block)) == {"I9"}


def test_limit_a_coupon_lost_in_mapping_is_caught_with_its_security(busy: Any, busy_block: Any) -> None:
    bonds = busy.prepared.bonds
    coupon = bonds.coupon.copy()
    u = bonds.ids.index("B4")
    coupon[u, np.flatnonzero(coupon[u])[3]] = 0.0
    said = refusal(replace(busy.prepared, bonds=replace(bonds, coupon=coupon)), busy_block)
    assert set(said) == {"I5"}
    assert "at B4, month" in said["I5"]
    assert "difference 1.625 " in said["I5"]


@pytest.mark.parametrize(
    ("code", "field", "key"),
    [("I1", "flows", ("start", "sale")), ("I2", "par", "called"), ("I3", "balances", "recoveries"),
     ("I4", "book", "principal"), ("I9", "flows", ("segment", "borrowed")), ("I10", "balances", "default_cost")],
)  # fmt: skip
def test_limit_what_is_not_a_number_is_caught(busy: Any, busy_block: Any, code: str, field: str, key: Any) -> None:
    said = refusal(busy.prepared, altered(busy_block, field, key, more(np.nan)))
    assert code in said
    assert "difference that is not a finite number at S3, life, month " in said[code]


def test_limit_what_is_not_a_number_in_the_first_block_is_still_named_after_the_last(busy: Any) -> None:
    first, second = project(busy.prepared, 0, 3), project(busy.prepared, 3, 7)
    bad = altered(first, "par", "sold", more(np.nan, (M, 0, 1)))
    with pytest.raises(IdentityFailed, match=r"I2 .*difference that is not a finite number at S2, annuities, month 14"):
        check_identities(busy.prepared, [bad, second])


def test_limit_money_within_the_tolerance_passes(busy: Any, busy_block: Any) -> None:
    table = check_identities(busy.prepared, [altered(busy_block, "par", "sold", more(5e-7))])
    assert table["holds"].all()
    assert table.set_index("identity").loc["I2", "where"] == WHERE


def test_limit_a_failed_identity_ends_the_command_with_3_and_writes_nothing(
    busy_folder: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    def faulty(*arguments: Any) -> BlockResult:
        return altered(project(*arguments), "par", "close", more(1.0, (M, S, 0)))

    monkeypatch.setattr(runner, "project", faulty)
    monkeypatch.setattr(sys, "argv", ["projector", "run", str(busy_folder), "--out", str(tmp_path / "out")])
    with pytest.raises(SystemExit) as ended:
        cli.main()
    assert ended.value.code == 3
    said = capsys.readouterr()
    assert said.out == ""
    assert said.err.startswith("sums that must hold do not; no report was written:\nI2 par: ")
    assert list(tmp_path.iterdir()) == []


def test_order_the_identities_table_does_not_depend_on_blocks(hand):
    from projector.run.identities import check_identities
    from projector.run.runner import run_blocks

    one = check_identities(hand.prepared, run_blocks(hand.prepared, 1, 2))
    two = check_identities(hand.prepared, run_blocks(hand.prepared, 1, 1))
    assert one["where"].tolist() == two["where"].tolist()


def test_limit_an_infinite_figure_is_caught(busy, busy_block):
    from projector.run.identities import check_identities
    from projector.study.errors import IdentityFailed

    for field, key in (
        ("par", "sold"),
        ("book", "accretion"),
        ("balances", "interest_earned"),
        ("flows", ("start", "sale")),
    ):
        bad, table = copy(busy_block), dict(getattr(busy_block, field))
        table[key] = table[key].copy()
        table[key][14, 1, 2] = np.inf
        setattr(bad, field, table)
        with pytest.raises(IdentityFailed):
            check_identities(busy.prepared, [bad])


def test_limit_a_reserve_off_by_a_cent_is_caught(busy, busy_block):
    bad, balances = copy(busy_block), dict(busy_block.balances)
    balances["reserve"] = balances["reserve"].copy()
    balances["reserve"][7, 0, 1] += 0.01
    bad.balances = balances
    with pytest.raises(IdentityFailed, match="I11"):
        check_identities(busy.prepared, [bad])
