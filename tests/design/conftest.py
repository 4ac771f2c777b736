"""Fixtures of the design tests."""

import importlib.util
from pathlib import Path

import pytest


@pytest.fixture(scope="session")
def run_small_steps():
    """The independent simulation of small_steps.py (test modules can't import each other by name here)."""
    spec = importlib.util.spec_from_file_location("small_steps", Path(__file__).with_name("small_steps.py"))
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module.run
