"""Fixtures of the report's tests: an invented run, its context, its page, and the page read as a tree."""

from __future__ import annotations

import importlib.util
import sys
from pathlib import Path
from types import ModuleType

import pytest

HERE = Path(__file__).parent


def _beside(name: str) -> ModuleType:
    """A helper module of this folder, importable by its plain name in the tests beside it."""
    if name not in sys.modules:
        spec = importlib.util.spec_from_file_location(name, HERE / f"{name}.py")
        assert spec is not None
        assert spec.loader is not None
        module = importlib.util.module_from_spec(spec)
        sys.modules[name] = module
        spec.loader.exec_module(module)
    return sys.modules[name]


synthetic = _beside("synthetic_results")
reading = _beside("page_reading")
COMMAND = "projector run scenarios/example"


@pytest.fixture(scope="session")
def results():
    """Seven scenarios, three segments, 480 months, 60 securities."""
    return synthetic.build()


@pytest.fixture(scope="session")
def context(results):
    """The typed context of the page."""
    from projector.report.context.page import page

    return page(results, COMMAND)


@pytest.fixture(scope="session")
def html(context):
    """The page as text."""
    from projector.report.render import rendered

    return rendered(context)


@pytest.fixture(scope="session")
def tree(html):
    """The page as a tree."""
    return reading.parse(html)


@pytest.fixture(scope="session")
def hostile():
    """The page of a study whose every word tries to break it."""
    from projector.report.render import render_report

    return render_report(synthetic.build(synthetic.Options(hostile=True)), COMMAND)
