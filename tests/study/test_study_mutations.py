"""Hundreds of small damages to a valid study: each ends in a refusal with located errors, or in a valid study."""

from __future__ import annotations

import random
from pathlib import Path
from typing import Any

import pytest

from projector.study.errors import StudyRefused
from projector.study.reading import read_study
from projector.study.records import Study

VALUES = [
    *("", " ", "0", "-0", "-1", "5", "1e400", "nan", "-inf", "1e-320", "٣", "0x1F", "1,5", "5%", "=1+1", "@x", "NA"),
    *("null", "true", "all", "2022-12-31", "2022-02-30", "9999-12-31", "1900-01-01", "31/12/2022", "B1", "S1", "A"),
    *("\x00", "\n", '"', "'", "x" * 300, "{row}", "{", "}}", "%s", "café", "\u202e", "BBB", "american", "make_whole"),
]
TOML_VALUES = [
    *("0", "-1", "1.5", "1e400", "nan", "inf", "true", '""', '"x"', "[]", "{}", "[[1]]", "2022-12-31", "2022-13-01"),
    *(
        '"\\u0000"',
        "9" * 400,
        "'FILL IN'",
        '"../x.csv"',
        '"study.toml"',
        "{a = 1}",
        "07:32:00",
        '"linear"',
        "1979-05-27T07:32:00Z",
    ),
]


def _outcome(folder: Path) -> str:
    """refused or valid; any other exception fails the test."""
    refusal: StudyRefused | None = None
    try:
        study, _ = read_study(folder)
    except StudyRefused as problem:
        refusal = problem
    if refusal is None:
        assert isinstance(study, Study)
        return "valid"
    assert refusal.errors
    for error in refusal.errors:
        assert error.sentence().startswith(error.code)
        assert error.sentence().isprintable()
    return "refused"


@pytest.mark.parametrize("seed", range(4))
def test_limit_damaged_cells_end_in_a_refusal_or_a_study(small: Any, seed: int) -> None:
    chance = random.Random(seed)
    small.write()
    import small_study

    outcomes = []
    for _ in range(60):
        name = chance.choice(sorted(small.tables))
        rows = [dict(row) for row in small.tables[name]]
        for _ in range(chance.choice((1, 1, 2))):
            chance.choice(rows)[chance.choice(sorted(rows[0]))] = chance.choice(VALUES)
        small_study.write_csv(small.folder / f"{name}.csv", rows)
        outcomes.append(_outcome(small.folder))
        small_study.write_csv(small.folder / f"{name}.csv", small.tables[name])
    assert outcomes.count("refused") > 30


@pytest.mark.parametrize("seed", range(4))
def test_limit_damaged_keys_end_in_a_refusal_or_a_study(small: Any, seed: int) -> None:
    chance = random.Random(100 + seed)
    folder = small.write()
    lines = small.toml.split("\n")
    for _ in range(60):
        damaged = list(lines)
        at = chance.randrange(len(damaged))
        key = damaged[at].split("=")[0]
        damaged[at] = chance.choice(
            [f"{key}= {chance.choice(TOML_VALUES)}", "", damaged[at][1:], damaged[at] + damaged[at], "[" + damaged[at]]
        )
        (folder / "study.toml").write_text("\n".join(damaged))
        _outcome(folder)


@pytest.mark.parametrize("suffix", ["csv", "parquet", "xlsx", "toml"])
def test_limit_damaged_bytes_end_in_a_refusal_or_a_study(small: Any, suffix: str) -> None:
    import small_study

    folder, chance = small.write(), random.Random(suffix)
    name = "study.toml" if suffix == "toml" else f"lots.{suffix}"
    frame = small_study.typed_frame(small.tables["lots"])
    if suffix == "parquet":
        frame.to_parquet(folder / name)
    elif suffix == "xlsx":
        frame.to_excel(folder / name, index=False, engine="xlsxwriter")
    if suffix in ("parquet", "xlsx"):
        (folder / "study.toml").write_text(small.toml.replace("lots.csv", name))
    good = (folder / name).read_bytes()
    for _ in range(60):
        damaged = bytearray(good)
        for _ in range(chance.choice((1, 3, 20))):
            damaged[chance.randrange(len(damaged))] = chance.randrange(256)
        (folder / name).write_bytes(damaged if chance.random() < 0.8 else damaged[: chance.randrange(len(damaged))])
        _outcome(folder)
