"""What lies in the project: the names at its top, and texts that name no machine and no registry."""

from __future__ import annotations

import re
import subprocess
from pathlib import Path

import pytest

import projector

ROOT = Path(__file__).resolve().parents[1]
HOUSE = Path(projector.__file__).resolve().parent
TOP = {"README.md", "DEVELOPERS.md", "LICENSE", "pyproject.toml", "requirements.lock", "projector", "scenarios",
       "tests", "reports"}  # fmt: skip
# written so that this file does not name them itself
REGISTRIES = ["pypi" + ".org", "pythonhosted" + ".org", "anaconda" + ".org", "npmjs" + ".", "conda" + ".io",
              "crates" + ".io"]  # fmt: skip
MACHINE_PATHS = re.compile(r"(?<![\w.])/(?:" + "|".join(("work", "root", "tmp", "home/[a-z]+")) + r")(?=[/\s]|$)")
CONVENTION = re.compile(r"\bC(\d{1,2})\b")


def tracked() -> list[Path]:
    """Files that git keeps; the test is skipped where there is no git."""
    try:
        said = subprocess.run(["git", "-C", str(ROOT), "ls-files", "-z"], capture_output=True, check=True)
    except (OSError, subprocess.CalledProcessError):
        pytest.skip("no git here")
    names = [name for name in said.stdout.decode().split("\0") if name]
    if not names:
        pytest.skip("git keeps none of these files")
    return [ROOT / name for name in names if (ROOT / name).is_file()]


def text_of(path: Path) -> str | None:
    """A file's text; None when it is none."""
    content = path.read_bytes()
    if b"\0" in content:
        return None
    try:
        return content.decode("utf-8")
    except UnicodeDecodeError:
        return None


def test_limit_the_top_of_the_project_holds_nothing_else() -> None:
    tops = {path.relative_to(ROOT).parts[0] for path in tracked()}
    assert {name for name in tops if not name.startswith(".")} <= TOP
    assert tops >= {"README.md", "DEVELOPERS.md", "LICENSE", "pyproject.toml", "projector", "tests"}


def test_limit_no_text_names_a_package_registry_or_a_place_on_a_machine() -> None:
    for path in tracked():
        text = text_of(path)
        if text is None:
            continue
        name = path.relative_to(ROOT).as_posix()
        for host in REGISTRIES:
            assert host not in text, f"{name} names {host}"
        for number, line in enumerate(text.split("\n"), start=1):
            found = MACHINE_PATHS.search(line)
            assert found is None, f"{name} line {number}: {found.group()}"


def test_limit_the_check_of_machine_paths_sees_one() -> None:
    assert MACHINE_PATHS.search("cd " + "/tm" + "p/x")
    assert MACHINE_PATHS.search("cd " + "/wor" + "k")
    assert not MACHINE_PATHS.search("share of net work/hour, tests/tmp/x and rework/ing")


def test_limit_texts_are_utf_8_without_carriage_returns() -> None:
    for path in tracked():
        if path.suffix in (".py", ".md", ".toml", ".j2", ".css", ".csv", ".lock", ".txt"):
            text = text_of(path)
            name = path.relative_to(ROOT).as_posix()
            assert text is not None, name
            assert "\r" not in text, name
            assert not text or text.endswith("\n"), name


def cited() -> dict[int, str]:
    """Numbers of conventions that the code cites, each with a file that does."""
    out: dict[int, str] = {}
    for path in sorted(HOUSE.rglob("*.py")):
        for number in CONVENTION.findall(path.read_text(encoding="utf-8")):
            out.setdefault(int(number), path.relative_to(HOUSE).as_posix())
    return out


def test_order_every_convention_cited_in_the_code_stands_in_the_developers_page() -> None:
    page = ROOT / "DEVELOPERS.md"
    if not page.is_file():
        pytest.skip("DEVELOPERS.md is not there yet")
    stated = {int(number) for number in re.findall(r"^\*\*C(\d{1,2}) ", page.read_text(encoding="utf-8"), re.MULTILINE)}
    assert len(stated) >= 10
    assert {number: file for number, file in cited().items() if number not in stated} == {}


def test_limit_the_code_holds_no_notes_to_finish_and_no_silenced_checks_without_reason() -> None:
    unfinished = re.compile("|".join(("TO" + "DO", "FIX" + "ME", "XX" + "X")))
    for path in sorted(HOUSE.rglob("*.py")):
        for number, line in enumerate(path.read_text(encoding="utf-8").split("\n"), start=1):
            assert not unfinished.search(line), f"{path.name} line {number}"
