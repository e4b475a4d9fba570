"""The small valid study, for tests that break it."""

from __future__ import annotations

import importlib.util
import sys
from collections.abc import Callable
from pathlib import Path
from types import ModuleType
from typing import Any

import pytest

from projector.study.errors import LocatedError, StudyRefused
from projector.study.reading import read_study


def _load_small_study() -> ModuleType:
    """The module beside this file: tests are no package, so it is loaded from its path, once."""
    name = "small_study"
    if name not in sys.modules:
        spec = importlib.util.spec_from_file_location(name, Path(__file__).with_name("small_study.py"))
        assert spec is not None
        assert spec.loader is not None
        module = importlib.util.module_from_spec(spec)
        sys.modules[name] = module
        spec.loader.exec_module(module)
    return sys.modules[name]


small_study = _load_small_study()


@pytest.fixture
def small(tmp_path: Path) -> Any:
    """A SmallStudy in a temporary folder, not yet written."""
    return small_study.SmallStudy(tmp_path / "small")


@pytest.fixture
def faults() -> Callable[[Any], tuple[LocatedError, ...]]:
    """Writes a small study, reads it, and gives the errors it is refused with."""

    def read(study: Any) -> tuple[LocatedError, ...]:
        with pytest.raises(StudyRefused) as refusal:
            read_study(study.write())
        return refusal.value.errors

    return read


@pytest.fixture
def only_fault(faults: Callable[[Any], tuple[LocatedError, ...]]) -> Callable[[Any], LocatedError]:
    """As `faults`, for a study that must be refused with one error."""

    def read(study: Any) -> LocatedError:
        found = faults(study)
        assert len(found) == 1, [error.sentence() for error in found]
        return found[0]

    return read
