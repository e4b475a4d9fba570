"""What tests of several rooms share: the study builders under their plain names, and studies staged once a session."""

from __future__ import annotations

import importlib.util
import sys
from collections.abc import Callable
from pathlib import Path
from types import ModuleType
from typing import Any

import pytest

HERE = Path(__file__).parent


def _load(name: str, path: Path) -> ModuleType:
    """A helper module by its path, importable by its plain name afterwards: tests are no package."""
    if name not in sys.modules:
        spec = importlib.util.spec_from_file_location(name, path)
        assert spec is not None
        assert spec.loader is not None
        module = importlib.util.module_from_spec(spec)
        sys.modules[name] = module
        spec.loader.exec_module(module)
    return sys.modules[name]


_load("small_study", HERE / "study" / "small_study.py")
_load("fine_grid", HERE / "bonds" / "fine_grid.py")
_load("valuation_bonds", HERE / "valuation_bonds.py")
studies = _load("projection_studies", HERE / "projection_studies.py")


@pytest.fixture
def run_command(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> Callable[..., tuple[int, str, str]]:
    """Runs a command in this process: exit code, output, error output."""
    from projector import cli

    def run(*arguments: object) -> tuple[int, str, str]:
        monkeypatch.setattr(sys, "argv", ["projector", *map(str, arguments)])
        capsys.readouterr()
        code = 0
        try:
            cli.main()
        except SystemExit as ended:
            code = int(ended.code or 0)
        said = capsys.readouterr()
        return code, said.out, said.err

    return run


def _staged(folder: Path) -> Any:
    from projector.run.runner import stage

    return stage(folder)


@pytest.fixture(scope="session")
def hand_folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The study for the pencil, written."""
    folder = tmp_path_factory.mktemp("hand") / "hand"
    return studies.hand_study(folder).write()


@pytest.fixture(scope="session")
def hand(hand_folder: Path) -> Any:
    """The study for the pencil, staged."""
    return _staged(hand_folder)


@pytest.fixture(scope="session")
def hand_block(hand: Any) -> Any:
    """Its two paths projected. Read only: a test that alters arrays takes a copy."""
    from projector.run.block import project

    return project(hand.prepared, 0, 2)


@pytest.fixture(scope="session")
def busy_folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The study that does everything, written."""
    folder = tmp_path_factory.mktemp("busy") / "busy"
    return studies.busy_study(folder).write()


@pytest.fixture(scope="session")
def busy(busy_folder: Path) -> Any:
    """The study that does everything, staged."""
    return _staged(busy_folder)


@pytest.fixture(scope="session")
def busy_block(busy: Any) -> Any:
    """Its seven paths projected. Read only: a test that alters arrays takes a copy."""
    from projector.run.block import project

    return project(busy.prepared, 0, 7)
