"""The examples in the docstrings are run, module by module as the source tree names them."""

import doctest
import importlib
import types

import pytest


def run_examples(module: types.ModuleType) -> doctest.TestResults:
    """Failures and attempts of one module's examples."""
    return doctest.testmod(module, optionflags=doctest.NORMALIZE_WHITESPACE | doctest.ELLIPSIS, report=False)


def test_every_example_in_a_docstring_is_true(sources) -> None:
    """All modules import, all examples hold, and there are examples at all."""
    results = {each.module: run_examples(importlib.import_module(each.module)) for each in sources}
    assert {name: result for name, result in results.items() if result.failed} == {}
    assert sum(result.attempted for result in results.values()) >= 20


def test_the_doctest_runner_sees_a_wrong_example(capsys: pytest.CaptureFixture[str]) -> None:
    """A module with a false example counts one failure."""
    module = types.ModuleType("made")
    module.__doc__ = ">>> 1 + 1\n3\n"
    assert run_examples(module).failed == 1
    assert "Expected" in capsys.readouterr().out
