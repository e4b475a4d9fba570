"""A new study explains itself, asks for every choice, and appears whole or not at all."""

from __future__ import annotations

import tomllib
from pathlib import Path

import pytest

from projector.study import columns
from projector.study.codes import CODES
from projector.study.errors import StudyRefused
from projector.study.folder import new_files, new_study, new_study_toml
from projector.study.reading import read_study
from projector.study.schema import StudyForm
from projector.study.tableschema import table_schemas


def test_limit_a_new_study_is_refused_until_every_choice_is_made(tmp_path: Path) -> None:
    new_study(tmp_path / "mine")
    with pytest.raises(StudyRefused) as refusal:
        read_study(tmp_path / "mine")
    errors = refusal.value.errors
    assert {error.code for error in errors} == {"E211"}
    assert len(errors) == new_study_toml().count('= "FILL IN"')
    assert errors[0].sentence() == (
        "E211 study.toml, row 9, column study.name: this has not been filled in (found 'FILL IN'); "
        "needed here: name of the study, in the report's title."
    )


def test_pinned_a_new_study_has_every_section_key_and_column() -> None:
    text = new_study_toml()
    assert set(tomllib.loads(text)) == {name for name, field in StudyForm.model_fields.items() if field.is_required()}
    assert "# [numerics]" in text
    assert "# interpolation = " in text
    for table in columns.study_tables("net_annual_cost").values():
        for column in table.columns:
            assert f"[{column.unit}] {column.meaning[:20]}" in text
    assert new_files()["lots.csv"] == "lot_id,security_id,segment,par,book_value,tax_basis\n"


def test_limit_an_empty_folder_is_taken_and_a_full_one_is_not(tmp_path: Path) -> None:
    folder = tmp_path / "mine"
    folder.mkdir()
    new_study(folder)
    before = sorted(path.name for path in folder.iterdir())
    assert len(before) == 9
    (folder / "lots.csv").write_text("mine")
    with pytest.raises(StudyRefused) as refusal:
        new_study(folder)
    assert refusal.value.errors[0].code == "E113"
    assert (folder / "lots.csv").read_text() == "mine"
    assert [path.name for path in tmp_path.iterdir()] == ["mine"]


def test_limit_nothing_is_left_when_it_cannot_be_written(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def fail(*_: object, **__: object) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(Path, "write_text", fail)
    with pytest.raises(StudyRefused) as refusal:
        new_study(tmp_path / "mine")
    assert refusal.value.errors[0].problem == "the new study was not written: No space left on device"
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize("name", ["file", "link", "none/mine"])
def test_limit_a_place_that_is_taken_or_not_there_is_refused(tmp_path: Path, name: str) -> None:
    (tmp_path / "file").write_text("x")
    (tmp_path / "link").symlink_to(tmp_path / "gone")
    with pytest.raises(StudyRefused):
        new_study(tmp_path / name)


def test_pinned_table_schemas_come_from_the_columns() -> None:
    schemas = table_schemas()
    assert len(schemas) == 16
    for schema in schemas.values():
        assert schema["fields"]
        assert schema["missingValues"] == [""]
    par = next(field for field in schemas["lots"]["fields"] if field["name"] == "par")
    assert par["constraints"] == {"required": True, "exclusiveMinimum": 0, "maximum": 1e10}
    assert schemas["securities"]["primaryKey"] == ["security_id"]


def test_pinned_every_code_in_the_source_is_explained_and_used() -> None:
    import re

    room = Path(columns.__file__).parent
    text = "\n".join(path.read_text() for path in room.glob("*.py") if path.name != "codes.py")
    used = set(re.findall(r'"(E[1-5]\d\d)"', text))
    assert used == set(CODES)
