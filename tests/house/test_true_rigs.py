"""A true rig stands for the hardware: it shares no code with what is tested on it."""

import ast
from pathlib import Path


def imports_gainwright(text: str) -> bool:
    """Whether any import, or any name given to importlib, reaches into the package."""
    for node in ast.walk(ast.parse(text)):
        if isinstance(node, ast.Import) and any(alias.name.split(".")[0] == "gainwright" for alias in node.names):
            return True
        if isinstance(node, ast.ImportFrom) and (node.module or "").split(".")[0] == "gainwright":
            return True
        if isinstance(node, ast.Constant) and isinstance(node.value, str) and node.value.startswith("gainwright."):
            return True
    return False


def test_the_true_rigs_import_nothing_of_gainwright(checkout: Path) -> None:
    """The samples and the proof campaign build and integrate their rigs by themselves."""
    for folder in ("sample_runs", "tests/campaign/proof"):
        files = sorted((checkout / folder).rglob("*.py"))
        assert files, folder
        assert [str(path) for path in files if imports_gainwright(path.read_text("utf-8"))] == []


def test_the_true_rig_check_sees_an_import() -> None:
    """All three ways of reaching the package are found."""
    assert imports_gainwright("from gainwright.ident.plant import Plant")
    assert imports_gainwright("import gainwright.ident as ident")
    assert imports_gainwright("import importlib\nimportlib.import_module('gainwright.io.job')")
    assert not imports_gainwright("import numpy")
