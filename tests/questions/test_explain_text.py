"""What `explain` prints and draws, and how the command ends."""

from __future__ import annotations

import re
import xml.etree.ElementTree as ET
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from projector.questions.explain import tell
from projector.questions.records import CallStory
from projector.report import call_story
from projector.report.call_story import headline, story_text
from projector.report.charts import canvas
from projector.report.charts.decision import Series
from projector.report.story_drawing import alternative, story_svg
from projector.run.block import project

ROOT = Path(__file__).resolve().parents[2]
SVG = "{http://www.w3.org/2000/svg}"
Command = Callable[..., tuple[int, str, str]]


@pytest.fixture
def command(run_command: Command) -> Command:
    """Runs a command in this process: exit code, output, error output."""
    return run_command


@pytest.fixture(scope="module")
def called(hand: Any, hand_block: Any) -> CallStory:
    """B1 of the study for the pencil on its second path: called in month 12."""
    return tell(hand.prepared, hand_block, hand.prepared.bonds.ids.index("B1"), 1, solve_all=True)


@pytest.fixture(scope="module")
def kept(hand: Any, hand_block: Any) -> CallStory:
    """The same on the first path: not called."""
    return tell(hand.prepared, hand_block, hand.prepared.bonds.ids.index("B1"), 0, solve_all=True)


@pytest.fixture(scope="module")
def many(busy: Any) -> CallStory:
    """A security with a right in every month of the projection."""
    return tell(busy.prepared, project(busy.prepared, 0, 1), busy.prepared.bonds.ids.index("B1"), 0, solve_all=True)


def test_known_the_headline_of_a_call_says_when_at_what_price_and_why(called: CallStory) -> None:
    said = headline(called)
    assert said.startswith("B1 (")
    assert ", 8.00% to 2032-12-31) on S2 2 lower: called in month 12 (2023-12-31) at 100.00." in said
    # the figures are those of the pencil: 114.088 = 4 x annuity of 18 half-years at 2.983 % + 100 discounted
    r = 1.015 * 1.045 / 1.03 - 1.0
    going_on = 4.0 * (1 - (1 + r) ** -18) / r + 100.0 * (1 + r) ** -18
    assert f"Going on would cost the issuer {going_on:.3f} per 100; calling costs 100.500 " in said
    assert "(price 100.00, cost 0.50, accrued 0.00)" in said
    assert f"Its refunding yield was {200 * r:.3f}%, " in said
    assert f"The issuer saved {going_on - 100.5:.3f} per 100 ($" in said
    assert "of par held); the holder lost " in said
    assert said.endswith("It was the first month with a live right.")


def test_known_the_headline_of_a_bond_that_is_kept_says_how_near_it_came(kept: CallStory) -> None:
    said = headline(kept)
    assert "not called. A right was live in 1 month: settled by the bound." in said
    assert "It came closest in month 12 (2023-12-31): going on costs 93.9" in said
    assert "Its refunding yield was 9.000%, " in said
    assert "bp over the 7.9" in said
    assert said.endswith("It is still outstanding at the horizon, month 24 (2024-12-31), and matures in month 120.")


def test_known_where_the_bound_settled_it_the_text_says_at_most_unless_solved(kept: CallStory) -> None:
    assert "going on costs at most 93.9" in story_text(kept)
    assert "going on costs 93.9" in story_text(kept, every_solve=True).replace("\n", " ")
    assert "Where going on is empty, the upper bound" in story_text(kept).replace("\n", " ")


def test_known_the_ways_a_security_is_never_called_are_told_apart(kept: CallStory) -> None:
    none = replace(kept, months=kept.months.assign(call_price=float("nan")))
    assert ": it has no right of call, so there was no decision to take. " in headline(replace(none, rights=()))
    whole = headline(replace(none, rights=(), make_whole=True))
    assert "not called, because its only right is a make-whole call, which this version reads and never uses." in whole
    late = headline(replace(none, rights=(30, 31)))
    assert "not called, because its rights begin in month 30, after the horizon of 24 months." in late
    assert story_text(none).count("\n\n") == 0  # no table and no accuracy of a solve that was not made


def test_known_what_was_sold_before_its_call_is_said(called: CallStory) -> None:
    sold = replace(called, months=called.months.assign(par_held=0.0))
    assert "None of it was held by then: all had been sold." in headline(sold)


def test_known_a_call_paid_later_names_both_months(called: CallStory, kept: CallStory) -> None:
    months = kept.months.assign(decision=called.months["decision"].reindex(kept.months.index))
    later = replace(called, paid=13, months=months.assign(critical_yield=0.1))
    assert (
        "called in month 12 (2023-12-31) at 100.00 plus interest accrued by then, paid in month 13 (2024-01-31)."
        in headline(later)
    )


def test_known_a_put_before_the_first_right_is_told(kept: CallStory) -> None:
    months = kept.months.assign(call_price=float("nan")).iloc[:7]
    story = replace(kept, rights=(12,), put=(6, 5, 99.0), months=months)
    said = headline(story)
    assert "not called: its rights begin in month 12. The holder puts it in month 6 (2023-06-30) at 99.00" in said
    assert "(decided in month 5): holding on was worth less." in said


def test_known_doubled_sinking_payments_are_told(kept: CallStory) -> None:
    assert "The issuer doubled 2 sinking payments, in months 6, 18. " in headline(replace(kept, doubled=(6, 18)))
    assert "doubled" not in headline(kept)


def test_known_an_announced_call_leaves_no_decision(kept: CallStory) -> None:
    said = headline(replace(kept, announced=True, redemption=101.5, maturity=2))
    assert "called before the valuation date; paid in month 2 at 101.50" in said


def test_order_a_tie_is_printed_with_the_decimals_that_show_it(called: CallStory) -> None:
    months = called.months.copy()
    months.loc[12, ["continuation", "issuer_saving"]] = [100.50031, 0.00031]
    said = headline(replace(called, months=months))
    assert "cost the issuer 100.50031 per 100; calling costs 100.50000 " in said
    assert "The issuer saved 0.00031 per 100" in said


def test_limit_the_table_shows_rights_around_the_decision_or_every_month(
    many: CallStory, monkeypatch: pytest.MonkeyPatch
) -> None:
    whole = story_text(many, every_month=True)
    assert len(re.findall(r"^ *\d+  \d{4}-\d\d-\d\d", whole, re.MULTILINE)) == len(many.months)
    monkeypatch.setattr(call_story, "MOST_ROWS", 4)
    monkeypatch.setattr(call_story, "BEFORE", 1)
    monkeypatch.setattr(call_story, "AFTER", 1)
    few = story_text(many)
    lines = re.findall(r"^ *\d+  \d{4}-\d\d-\d\d", few, re.MULTILINE)
    assert 2 <= len(lines) <= 4
    left = len(many.live) - len(lines)
    assert f"{left} months with a live right not shown; --all prints them." in few.replace("\n", " ")
    assert few.count("\n  ...") >= 1


def test_limit_no_line_is_wider_than_a_terminal_of_130(many: CallStory, called: CallStory) -> None:
    for story in (many, called):
        assert max(map(len, story_text(story, every_month=True, every_solve=True).split("\n"))) <= 130


def test_order_text_holds_no_nan_and_no_negative_zero(many: CallStory, kept: CallStory) -> None:
    for story in (many, kept):
        text = story_text(story, every_month=True) + story_svg(story)
        assert not re.search(r"\bnan\b|\binf\b|[-−]0\.0+\b(?!\d)", text)


@pytest.mark.parametrize("which", ["called", "kept", "many"])
def test_limit_the_drawing_stands_alone_and_has_a_text_alternative(which: str, request: pytest.FixtureRequest) -> None:
    story = request.getfixturevalue(which)
    text = story_svg(story)
    root = ET.fromstring(text.encode())
    assert root.tag == f"{SVG}svg"
    assert root.get("role") == "img"
    name, long_form = root.find(f"{SVG}title"), root.find(f"{SVG}desc")
    assert name is not None
    assert long_form is not None
    assert root.get("aria-labelledby") == f"{name.get('id')} {long_form.get('id')}"
    assert long_form.text == alternative(story)
    assert 60 <= len(alternative(story)) <= 500
    assert text.count("http") == 1  # the name space
    for word in ("<script", "<style", "<image", "@import", "onload"):
        assert word not in text
    ids = re.findall(r'\bid="([^"]+)"', text)
    assert len(ids) == len(set(ids))
    assert set(re.findall(r'href="([^"]+)"', text)) <= {f"#{one}" for one in ids}
    assert set(re.findall(r"url\(([^)]+)\)", text)) <= {f"#{one}" for one in ids}


def test_limit_colours_and_sizes_of_the_drawing_are_the_report_s(many: CallStory) -> None:
    known = {v for k, v in vars(canvas).items() if k.isupper() and str(v).startswith("#")} | {"#ffffff"}
    text = story_svg(many)
    assert set(re.findall(r"#[0-9a-f]{6}\b", text)) <= known
    assert min(float(size) for size in re.findall(r"font-size: ([\d.]+)px", text)) >= 7.5


def test_limit_a_right_alone_is_a_mark_and_rights_in_a_row_a_line() -> None:
    gap = float("nan")
    row = Series("x", [gap, 1.0, 2.0, gap, 3.0, gap], "#1b1f24", "-", "o")
    assert (row.alone, row.apart) == ([4], False)
    assert (Series("x", [1.0, gap, 2.0], "#1b1f24", "-", "o").alone) == [0, 2]
    assert Series("x", [1.0, gap, 2.0], "#1b1f24", "-", "o").apart


def test_limit_text_of_the_user_is_escaped(called: CallStory) -> None:
    hostile = replace(called, issuer='<script>alert(1)</script> "&\u202e', scenario_title="<b>")
    text = story_svg(hostile)
    ET.fromstring(text.encode())
    assert "<script" not in text
    assert "<b>" not in text
    assert "\u202e" not in text
    assert "\u202e" not in story_text(hostile)


def test_order_the_same_story_draws_the_same_bytes(many: CallStory) -> None:
    assert story_svg(many) == story_svg(many)


def test_known_the_command_prints_the_story_and_draws_it(
    hand_folder: Path, tmp_path: Path, command: Command, called: CallStory
) -> None:
    out = tmp_path / "b1.svg"
    code, said, err = command("explain", hand_folder, "--security", "B1", "--scenario", "S2", "--out", out)
    assert (code, err) == (0, "")
    assert said == f"{story_text(called)}\n\ndrawing: {out}\n"
    assert out.read_text(encoding="utf-8") == story_svg(called)
    assert [p.name for p in tmp_path.iterdir()] == ["b1.svg"]
    out.write_text("old", encoding="utf-8")
    assert command("explain", hand_folder, "--security", "B1", "--scenario", "2 lower", "--out", out)[0] == 0
    assert out.read_text(encoding="utf-8") == story_svg(called)


def test_known_a_security_without_rights_says_so_and_ends_with_0(
    hand_folder: Path, tmp_path: Path, command: Command
) -> None:
    out = tmp_path / "b2.svg"
    code, said, err = command("explain", hand_folder, "--security", "B2", "--scenario", "S1", "--out", out)
    assert (code, err) == (0, "")
    one_line = said.replace("\n", " ")
    assert "it has no right of call, so there was no decision to take. It pays what was promised and" in one_line
    assert said.endswith("no drawing: no right is live on this path\n")
    assert not out.exists()


@pytest.mark.parametrize(
    ("words", "start"),
    [
        (("--security", "B9", "--scenario", "S1"), "E601 security: "),
        (("--security", "B1", "--scenario", "S9"), "E602 scenario: "),
    ],
)
def test_limit_unknown_names_end_with_2_and_one_sentence(
    words: tuple[str, ...], start: str, hand_folder: Path, command: Command
) -> None:
    code, said, err = command("explain", hand_folder, *words)
    assert (code, said) == (2, "")
    assert err.startswith(start)
    assert err.count("\n") == 1


@pytest.mark.parametrize("name", ["drawing.html", "drawing", "inside.svg"])
def test_limit_a_drawing_never_lands_in_the_study_nor_on_another_kind_of_file(
    name: str, hand_folder: Path, tmp_path: Path, command: Command
) -> None:
    out = hand_folder / "inside.svg" if name == "inside.svg" else tmp_path / name
    code, said, err = command("explain", hand_folder, "--security", "B1", "--scenario", "S1", "--out", out)
    assert (code, said) == (2, "")
    assert "--out" in err
    assert not out.exists()


def test_limit_a_folder_that_is_not_there_ends_with_2_and_leaves_nothing(
    hand_folder: Path, tmp_path: Path, command: Command
) -> None:
    out = tmp_path / "nowhere" / "b1.svg"
    code, _, err = command("explain", hand_folder, "--security", "B1", "--scenario", "S1", "--out", out)
    assert code == 2
    assert err.startswith("E190 ")
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize("words", [(), ("--security", "B1"), ("--scenario", "S1")])
def test_limit_both_names_must_be_given(words: tuple[str, ...], hand_folder: Path, command: Command) -> None:
    code, said, err = command("explain", hand_folder, *words)
    assert (code, said) == (2, "")
    assert "Traceback" not in err


@pytest.mark.long
def test_pinned_the_readme_shows_what_the_command_prints(command: Command, monkeypatch: pytest.MonkeyPatch) -> None:
    readme = (ROOT / "README.md").read_text(encoding="utf-8")
    asked = re.search(r"^    projector (explain scenarios/.*)$", readme, re.MULTILINE)
    assert asked is not None
    monkeypatch.chdir(ROOT)
    code, said, _ = command(*asked[1].split())
    assert code == 0
    assert "\n".join(f"    {line}".rstrip() for line in said.rstrip("\n").split("\n")) in readme
