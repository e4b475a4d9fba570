"""The house: rooms import from their own floor and below, and the report from results alone."""

from __future__ import annotations

import ast
from collections.abc import Iterator
from pathlib import Path

import pytest

import projector

HOUSE = Path(projector.__file__).resolve().parent
# room -> floor
FLOORS = {
    "arithmetic": 0, "study": 0, "rates": 1, "bonds": 2, "liabilities": 2, "balance": 3, "measures": 4, "run": 5,
    "questions": 6, "report": 7,
}  # fmt: skip
# rooms of one floor that lean on no other room of it
APART = {("arithmetic", "study"), ("study", "arithmetic"), ("bonds", "liabilities"), ("liabilities", "bonds")}
FILES = sorted(HOUSE.rglob("*.py"))
REPORT_READS = ("projector.run.results", "projector.questions.records", "projector.study", "projector.report")


def room_of(path: Path) -> str:
    """The room a file stands in; empty for the two files that put everything together."""
    inside = path.relative_to(HOUSE).parts
    return inside[0] if len(inside) > 1 else ""


def imported(path: Path) -> Iterator[tuple[str, int]]:
    """Every module of the house that a file imports, at its top or inside a function, with the line."""
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            names = [alias.name for alias in node.names]
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path} line {node.lineno}: imports are written in full"
            names = [node.module or ""]
            if node.module == "projector":
                names = [f"projector.{alias.name}" for alias in node.names]
        else:
            continue
        yield from ((name, node.lineno) for name in names if name.split(".")[0] == "projector")


def test_limit_every_room_has_a_floor() -> None:
    rooms = {p.name for p in HOUSE.iterdir() if p.is_dir() and (p / "__init__.py").is_file()}
    assert rooms <= set(FLOORS)
    assert len(rooms) >= 9


@pytest.mark.parametrize("path", FILES, ids=lambda p: p.relative_to(HOUSE).as_posix())
def test_order_imports_go_down_only(path: Path) -> None:
    here = room_of(path)
    if not here:
        return  # cli and __init__ compose stage, render and publish
    for name, line in imported(path):
        there = name.split(".")[1] if "." in name else ""
        assert there in FLOORS, f"line {line}: {name} names no room"
        assert FLOORS[there] <= FLOORS[here], f"line {line}: {here} imports {name} from a floor above"
        assert (here, there) not in APART, f"line {line}: {here} and {there} stand beside each other"


@pytest.mark.parametrize("path", sorted((HOUSE / "report").rglob("*.py")), ids=lambda p: p.name)
def test_order_the_report_reads_results_and_cannot_compute(path: Path) -> None:
    for name, line in imported(path):
        assert name.startswith(REPORT_READS), f"line {line}: the report imports {name}"


def test_limit_only_the_run_the_questions_and_the_report_are_named_by_the_commands() -> None:
    rooms = {name.split(".")[1] for name, _ in imported(HOUSE / "cli.py") if "." in name}
    assert rooms <= {"run", "questions", "report", "study"}


def test_limit_the_check_sees_an_import_that_goes_up(tmp_path: Path) -> None:
    """A planted import inside a function is found."""
    source = "def f() -> None:\n    from projector.report.render import render_report\n"
    (tmp_path / "planted.py").write_text(source, encoding="utf-8")
    assert list(imported(tmp_path / "planted.py")) == [("projector.report.render", 2)]


def test_limit_nothing_in_the_calculation_reads_a_clock_or_the_environment() -> None:
    """Valuation date and choices are fields of the study; only the run statement names the machine."""
    ambient = {"today", "now", "utcnow", "time_ns", "monotonic", "perf_counter", "getenv", "environ"}
    allowed = {"arithmetic/kernels.py"}  # where compiled kernels are kept
    for path in FILES:
        name = path.relative_to(HOUSE).as_posix()
        if name in allowed or room_of(path) in ("", "report"):
            continue
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
            if isinstance(node, ast.Attribute):
                assert node.attr not in ambient, f"{name} line {node.lineno}: {node.attr}"
