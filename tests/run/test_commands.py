"""The commands: what they print, how they end, and that a results folder is there whole or not at all."""

from __future__ import annotations

import json
import os
import random
import signal
import subprocess
import sys
import textwrap
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pandas as pd
import pyarrow.parquet as pq
import pytest
from projection_studies import hand_study

import projector
from projector.run import limits, publish
from projector.run.publish import STALE_PREFIX, file_digest
from projector.run.results import COLUMNS
from projector.run.runner import run_study

RESULTS = [name for name in COLUMNS if name != "identities"]  # what the checks compared says where rounding was largest
PACKAGE_HOME = Path(projector.__file__).resolve().parents[1]


class Ended:
    """How a command ended and what it said."""

    def __init__(self, code: int, out: str, err: str) -> None:
        self.code, self.out, self.err = code, out, err


@pytest.fixture
def command(run_command: Callable[..., tuple[int, str, str]]) -> Callable[..., Ended]:
    """Runs a command in this process."""
    return lambda *arguments: Ended(*run_command(*arguments))


def process(*arguments: object, folder: Path) -> subprocess.Popen[str]:
    """Starts a command in a process of its own."""
    environment = os.environ | {"PYTHONPATH": str(PACKAGE_HOME)}
    return subprocess.Popen(
        [sys.executable, "-m", "projector.cli", *map(str, arguments)],
        cwd=folder, env=environment, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True,
    )  # fmt: skip


def listing(folder: Path) -> dict[str, str]:
    """Every file below a folder and its digest."""
    return {p.relative_to(folder).as_posix(): file_digest(p) for p in sorted(folder.rglob("*")) if p.is_file()}


@pytest.fixture(scope="module")
def tables_only(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A place for results without a report, made once: `out` is the folder of the last run."""
    return tmp_path_factory.mktemp("runs")


# new and check


def test_known_new_writes_a_folder_and_check_says_what_is_left_to_state(tmp_path: Path, command: Any) -> None:
    folder = tmp_path / "study"
    made = command("new", folder)
    assert (made.code, made.err) == (0, "")
    assert made.out.startswith(f"wrote {folder}: state every value in study.toml")
    assert (folder / "study.toml").is_file()
    assert len(list(folder.iterdir())) == 9
    asked = command("check", folder)
    assert (asked.code, asked.out) == (2, "")
    lines = asked.err.strip().split("\n")
    assert len(lines) > 20
    for line in lines:
        assert line.startswith("E2")
        assert "study.toml, row " in line
        assert line.endswith(".")
        assert ": " in line
        assert "; " in line
    assert "Traceback" not in asked.err


def test_limit_new_leaves_what_is_there_alone(tmp_path: Path, command: Any) -> None:
    (tmp_path / "notes.txt").write_text("mine", encoding="utf-8")
    refused = command("new", tmp_path)
    assert refused.code == 2
    assert refused.err.startswith("E113 ")
    assert [p.name for p in tmp_path.iterdir()] == ["notes.txt"]


def test_known_check_prints_the_digests_the_choices_and_the_warnings(
    hand_folder: Path, hand: Any, command: Any
) -> None:
    before = listing(hand_folder)
    asked = command("check", hand_folder)
    assert (asked.code, asked.err) == (0, "")
    study = hand.prepared.study
    assert f"input digest {study.input_digest}" in asked.out
    assert f"rate path set {hand.prepared.paths.digest()} (2 paths)" in asked.out
    assert "  lots_count all: 3.00, 3.00, 0.00\n" in asked.out
    assert "  cash all: 50,000.00, 50,000.00, 0.00\n" in asked.out
    assert "Liability block payout uses one stream for every path" in asked.out
    for title in (
        "Control totals",
        "Starting assets",
        "Choices in force",
        "Spreads",
        "Special cases",
        "Sizes",
        "Warnings",
    ):
        assert f"\n{title}" in asked.out
    assert "Checked: nothing was projected. Next: projector run " in asked.out
    assert listing(hand_folder) == before


def test_known_check_prints_schemas(command: Any) -> None:
    asked = command("check", "--schemas")
    assert asked.code == 0
    schemas = json.loads(asked.out)
    assert set(schemas) == {"study.toml", "tables"}


@pytest.mark.parametrize(
    "words", [("check",), ("run",), ("nothing",), ("run", "a", "b"), ("run", "a", "--threads", "-1")]
)
def test_limit_wrong_usage_ends_with_2(words: tuple[str, ...], command: Any) -> None:
    ended = command(*words)
    assert (ended.code, ended.out) == (2, "")
    assert "Traceback" not in ended.err


@pytest.mark.parametrize("verb", ["check", "run"])
def test_limit_a_missing_folder_ends_with_2_and_one_sentence(tmp_path: Path, verb: str, command: Any) -> None:
    ended = command(verb, tmp_path / "nowhere")
    assert (ended.code, ended.out) == (2, "")
    assert ended.err.startswith("E101 ")
    assert ended.err.count("\n") == 1


def test_limit_yields_that_cannot_be_discounted_end_with_2_and_a_sentence(tmp_path: Path, command: Any) -> None:
    study = hand_study(tmp_path / "hand")
    rates = (("3", "0.01"), ("12", "0.01"), ("120", "0.02"), ("360", "0.29"))
    study.tables["yield_curve"] = [{"tenor_months": tenor, "rate": rate} for tenor, rate in rates]
    ended = command("check", study.write())
    assert (ended.code, ended.out) == (2, "")
    assert ended.err.startswith("E4")
    assert "leave no positive discount" in ended.err


def test_limit_a_study_that_would_not_fit_ends_with_4_and_the_arithmetic(
    hand_folder: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, command: Any
) -> None:
    monkeypatch.setattr(limits.refuse_too_large, "__defaults__", (50_000,))
    ended = command("run", hand_folder, "--out", tmp_path / "out")
    assert (ended.code, ended.out) == (4, "")
    assert ended.err.startswith("E120 study.toml: the run would pass the memory limit of 0 MB: 3 securities x ")
    assert list(tmp_path.iterdir()) == []


def test_limit_our_own_fault_ends_with_1_and_no_traceback(
    hand_folder: Path, monkeypatch: pytest.MonkeyPatch, command: Any
) -> None:
    def broken(*_: object) -> None:
        raise RuntimeError("a fault")

    monkeypatch.setattr("projector.run.runner.stage", broken)
    ended = command("check", hand_folder)
    assert (ended.code, ended.out) == (1, "")
    assert ended.err.startswith("E900 the program itself failed (RuntimeError at test_commands.py, line ")
    assert "Traceback" not in ended.err


# run


def test_known_run_writes_the_folder_whole(hand_folder: Path, hand: Any, tmp_path: Path, command: Any) -> None:
    before = listing(hand_folder)
    ended = command("run", hand_folder, "--out", tmp_path / "out")
    assert (ended.code, ended.err) == (0, "")
    lines = ended.out.strip().split("\n")
    assert lines[1:] == [f"results: {tmp_path / 'out'}", f"report: {tmp_path / 'out' / 'report.html'}"]
    assert lines[0].startswith("criterion ")
    assert [p.name for p in tmp_path.iterdir()] == ["out"]
    found = listing(tmp_path / "out")
    tables = {f"tables/{name}.parquet" for name in (*COLUMNS, "addresses")}
    assert set(found) == {"report.html", "report.xlsx", "run_statement.json", *tables}
    statement = json.loads((tmp_path / "out" / "run_statement.json").read_text(encoding="utf-8"))
    assert {s["name"]: s["digest"]["sha256"] for s in statement["subject"]} == {
        name: digest for name, digest in found.items() if name != "run_statement.json"
    }
    built = statement["predicate"]["buildDefinition"]
    assert built["inputDigest"] == hand.prepared.study.input_digest
    inputs = {d["name"]: d["digest"]["sha256"] for d in built["resolvedDependencies"]}
    assert inputs == {name: digest for name, digest in before.items() if name in inputs}
    assert set(inputs) == set(before)
    assert listing(hand_folder) == before  # a run writes nothing into its study


def test_known_without_out_the_folder_is_named_by_study_and_digest(
    hand_folder: Path, hand: Any, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, command: Any
) -> None:
    monkeypatch.chdir(tmp_path)
    ended = command("run", hand_folder, "--no-report")
    assert ended.code == 0
    name = f"hand-{hand.prepared.study.input_digest[:12]}"
    assert [p.name for p in (tmp_path / "reports").iterdir()] == [name]
    assert set(listing(tmp_path / "reports" / name)) == {
        "run_statement.json", *(f"tables/{table}.parquet" for table in COLUMNS),
    }  # fmt: skip


def test_known_tables_on_disk_carry_units_and_the_figures_of_the_run(
    hand_folder: Path, tables_only: Path, command: Any
) -> None:
    results = run_study(hand_folder)
    assert command("run", hand_folder, "--no-report", "--out", tables_only / "out").code == 0
    for name, frame in results.tables().items():
        path = tables_only / "out" / "tables" / f"{name}.parquet"
        pd.testing.assert_frame_equal(pd.read_parquet(path), frame, check_exact=True, check_dtype=False)
        for field in pq.read_schema(path):
            assert field.metadata[b"unit"].decode() == COLUMNS[name][field.name][0]


def test_order_threads_and_blocks_change_no_table_of_results(hand_folder: Path, tmp_path: Path, command: Any) -> None:
    found = []
    for name, more in (("one", ("--threads", 1)), ("two", ("--threads", 2, "--block", 1))):
        assert command("run", hand_folder, "--no-report", "--out", tmp_path / name, *more).code == 0
        files = listing(tmp_path / name)
        found.append({file: files[file] for file in files if file.split("/")[-1].split(".")[0] in RESULTS})
    assert len(found[0]) == len(RESULTS)
    assert found[0] == found[1]


def test_limit_results_never_land_in_the_study(hand_folder: Path, command: Any) -> None:
    before = listing(hand_folder)
    for place in (hand_folder, hand_folder / "out", hand_folder / "a" / ".." / "out"):
        ended = command("run", hand_folder, "--no-report", "--out", place)
        assert ended.code == 2
        assert "lies in the study folder" in " ".join(ended.err.split())
    assert listing(hand_folder) == before
    assert all(p.is_file() for p in hand_folder.iterdir())


def test_limit_a_folder_that_no_run_wrote_is_left_alone(hand_folder: Path, tmp_path: Path, command: Any) -> None:
    (tmp_path / "thesis.txt").write_text("mine", encoding="utf-8")
    before = listing(tmp_path)
    ended = command("run", hand_folder, "--no-report", "--out", tmp_path)
    assert ended.code == 2
    assert "holds thesis.txt, which no run wrote" in " ".join(ended.err.replace("│", " ").split())
    assert listing(tmp_path) == before
    assert not list(tmp_path.parent.glob(f"{STALE_PREFIX}*"))


def test_known_a_second_run_replaces_the_folder_whole(hand_folder: Path, tables_only: Path, command: Any) -> None:
    target = tables_only / "again"
    assert command("run", hand_folder, "--no-report", "--out", target).code == 0
    before = listing(target)
    (target / "tables" / "balance.parquet").write_bytes(b"spoilt")
    assert command("run", hand_folder, "--no-report", "--out", target).code == 0
    assert listing(target) == before
    (target / "notes.txt").write_text("mine", encoding="utf-8")
    refused = command("run", hand_folder, "--no-report", "--out", target)
    assert refused.code == 2
    assert (target / "notes.txt").read_text(encoding="utf-8") == "mine"
    assert not list(tables_only.glob(f"{STALE_PREFIX}*"))


def test_limit_a_refused_study_leaves_the_earlier_results_as_they_are(tmp_path: Path, command: Any) -> None:
    study = hand_study(tmp_path / "hand")
    study.write()
    target = tmp_path / "out"
    assert command("run", study.folder, "--no-report", "--out", target).code == 0
    before = listing(tmp_path)
    study.cell("lots", 2, "par", "1e3").write()
    ended = command("run", study.folder, "--no-report", "--out", target)
    assert (ended.code, ended.out) == (2, "")
    after = listing(tmp_path)
    assert {n: d for n, d in after.items() if n.startswith("out/")} == {
        n: d for n, d in before.items() if n.startswith("out/")
    }
    assert sorted(p.name for p in tmp_path.iterdir()) == ["hand", "out"]


# publishing


def build(text: str) -> Callable[[Path], None]:
    """A builder of a folder with two files."""

    def write(folder: Path) -> None:
        (folder / "a.txt").write_text(text, encoding="utf-8")
        (folder / "inner").mkdir()
        (folder / "inner" / "b.txt").write_text(text, encoding="utf-8")

    return write


def read(folder: Path) -> list[str]:
    return [p.read_text(encoding="utf-8") for p in (folder / "a.txt", folder / "inner" / "b.txt")]


def test_limit_a_builder_that_fails_leaves_the_old_folder_and_no_other(tmp_path: Path) -> None:
    target = tmp_path / "out"
    publish.publish(target, build("old"))

    def fails(folder: Path) -> None:
        build("new")(folder)
        raise OSError(28, "No space left on device")

    with pytest.raises(OSError, match="No space left"):
        publish.publish(target, fails)
    assert read(target) == ["old", "old"]
    assert [p.name for p in tmp_path.iterdir()] == ["out"]


@pytest.mark.parametrize("call", [1, 2, 3])
def test_limit_a_failing_rename_brings_the_old_folder_back(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, call: int
) -> None:
    target, calls, rename = tmp_path / "out", [], os.rename
    publish.publish(target, build("old"))

    def failing(source: Any, place: Any) -> None:
        calls.append((source, place))
        if len(calls) == call:
            raise OSError(5, "Input/output error")
        rename(source, place)

    monkeypatch.setattr(publish.os, "rename", failing)
    if call < 3:  # there are two renames when nothing fails
        with pytest.raises(OSError, match="Input/output"):
            publish.publish(target, build("new"))
        assert read(target) == ["old", "old"]
    else:
        publish.publish(target, build("new"))
        assert read(target) == ["new", "new"]
    assert [p.name for p in tmp_path.iterdir()] == ["out"]


def test_limit_a_failed_sync_is_fatal(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    target = tmp_path / "out"
    publish.publish(target, build("old"))

    def failing(_: int) -> None:
        raise OSError(5, "Input/output error")

    monkeypatch.setattr(publish.os, "fsync", failing)
    with pytest.raises(OSError, match="Input/output"):
        publish.publish(target, build("new"))
    assert read(target) == ["old", "old"]


def dead_process() -> int:
    """The number of a process that has ended."""
    ended = subprocess.Popen([sys.executable, "-c", ""])
    ended.wait()
    return ended.pid


def test_known_what_a_killed_run_left_is_cleared_and_a_running_one_keeps_its_own(tmp_path: Path) -> None:
    gone = [tmp_path / f"{STALE_PREFIX}{dead_process()}-abc"]
    strange = tmp_path / f"{STALE_PREFIX}noted"  # not a name of ours: somebody else's
    strange.mkdir()
    alive = tmp_path / f"{STALE_PREFIX}{os.getpid()}-abc"
    for folder in (*gone, alive):
        folder.mkdir()
        build("half")(folder)
    publish.publish(tmp_path / "out", build("new"))
    assert sorted(p.name for p in tmp_path.iterdir()) == sorted([alive.name, strange.name, "out"])
    assert read(tmp_path / "out") == ["new", "new"]


# processes of their own


def test_known_the_module_runs_as_a_program_and_is_silent_without_a_terminal(hand_folder: Path, tmp_path: Path) -> None:
    child = process("run", hand_folder, "--no-report", "--out", "out", folder=tmp_path)
    out, err = child.communicate(timeout=300)
    assert (child.returncode, err) == (0, "")
    assert out.split("\n")[1] == "results: out"
    assert (tmp_path / "out" / "run_statement.json").is_file()


@pytest.mark.long
def test_limit_a_run_killed_at_any_moment_leaves_the_old_folder_or_the_new(tmp_path: Path) -> None:
    """Process death only; seeds are fixed, moments are not quite."""
    rng = random.Random(20221231)
    study = hand_study(tmp_path / "hand")
    study.write()
    first = process("run", study.folder, "--no-report", "--out", "out", folder=tmp_path)
    first.communicate(timeout=300)
    started = time.monotonic()
    study.replace("Invented data.", "Invented figures.").write()
    second = process("run", study.folder, "--no-report", "--out", "other", folder=tmp_path)
    second.communicate(timeout=300)
    length = time.monotonic() - started
    allowed = [tables(tmp_path / "out"), tables(tmp_path / "other")]
    assert allowed[0] != allowed[1]
    for trial in range(16):
        child = process("run", study.folder, "--no-report", "--out", "out", folder=tmp_path)
        # half of the moments over the whole run, half near its end, where it writes
        time.sleep(length * (rng.uniform(0.05, 1.0) if trial % 2 else rng.uniform(0.85, 1.1)))
        child.send_signal(signal.SIGKILL)
        child.communicate()
        assert tables(tmp_path / "out") in allowed, trial
    last = process("run", study.folder, "--no-report", "--out", "out", folder=tmp_path)
    last.communicate(timeout=300)
    assert last.returncode == 0
    assert tables(tmp_path / "out") == allowed[1]
    assert sorted(p.name for p in tmp_path.iterdir()) == ["hand", "other", "out"]


def tables(folder: Path) -> dict[str, str]:
    """The whole folder as its statement describes it; the statement itself names the machine."""
    found = listing(folder)
    statement = json.loads((folder / "run_statement.json").read_text(encoding="utf-8"))
    assert {s["name"] for s in statement["subject"]} == set(found) - {"run_statement.json"}
    assert all(found[s["name"]] == s["digest"]["sha256"] for s in statement["subject"])
    return {"input digest": statement["predicate"]["buildDefinition"]["inputDigest"]} | {
        name: digest for name, digest in found.items() if name != "run_statement.json"
    }


def test_limit_a_kill_between_the_two_renames_loses_nothing(tmp_path):
    code = textwrap.dedent("""
        import os, signal, sys
        from pathlib import Path
        from projector.run import publish
        target = Path(sys.argv[1])
        def build(text):
            return lambda folder: (folder / "a.txt").write_text(text)
        publish.publish(target, build("old"))
        rename = os.rename
        def killed(a, b):
            rename(a, b)
            if str(a) == str(target):
                os.kill(os.getpid(), signal.SIGKILL)
        os.rename = killed
        publish.publish(target, build("new"))
    """)
    import projector
    from projector.run import publish

    home = Path(projector.__file__).resolve().parents[1]
    subprocess.run(
        [sys.executable, "-c", code, str(tmp_path / "out")], env={"PYTHONPATH": str(home), "HOME": str(tmp_path.parent)}
    )

    def fails(_):
        raise OSError(28, "No space left on device")

    with pytest.raises(OSError, match="No space"):
        publish.publish(tmp_path / "out", fails)
    assert (tmp_path / "out" / "a.txt").read_text() in ("old", "new")


def test_limit_results_never_replace_what_holds_the_study(tmp_path: Path, command: Any) -> None:
    study = hand_study(tmp_path / "home" / "hand").write()
    (tmp_path / "home" / "run_statement.json").write_text("{}", encoding="utf-8")
    before = listing(tmp_path)
    ended = command("run", study, "--no-report", "--out", tmp_path / "home")
    assert ended.code == 2
    assert "would replace a folder that holds more than results" in " ".join(ended.err.split())
    assert listing(tmp_path) == before
