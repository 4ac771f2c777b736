"""The made-up job of the report's tests, for the pictures."""

import importlib.util
from pathlib import Path
from typing import Any

import pytest


@pytest.fixture(scope="session")
def made() -> Any:
    """A released outcome, made once."""
    place = Path(__file__).parent.parent / "report" / "conftest.py"
    spec = importlib.util.spec_from_file_location("made_up_job", place)
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module.build_outcome()
