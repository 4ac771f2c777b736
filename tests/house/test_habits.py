"""Habits that hold everywhere: file size, honest exceptions, nothing left open."""

import ast
import re

import pytest

MOST_LINES = 400
OPEN = re.compile(r"\b(" + "TO" + r"DO|FIX" + r"ME|XXX)\b")


def bad_habits(text: str) -> list[str]:
    """Blanket handlers, bare exceptions raised, mutable module state, and marks of unfinished work."""
    found = []
    for node in ast.walk(ast.parse(text)):
        if isinstance(node, ast.ExceptHandler) and _is_blanket(node.type):
            found.append(f"line {node.lineno}: a blanket except")
        elif isinstance(node, ast.Raise) and _name(node.exc) in ("Exception", "BaseException", "NotImplementedError"):
            found.append(f"line {node.lineno}: raises {_name(node.exc)}")
        elif isinstance(node, ast.Global):
            found.append(f"line {node.lineno}: global state")
    marks = [(number, OPEN.search(line)) for number, line in enumerate(text.splitlines(), 1)]
    return found + [f"line {number}: {mark[0]}" for number, mark in marks if mark]


def _is_blanket(kind: ast.expr | None) -> bool:
    names = kind.elts if isinstance(kind, ast.Tuple) else [kind]
    return any(each is None or _name(each) in ("Exception", "BaseException") for each in names)


def _name(node: ast.expr | None) -> str:
    node = node.func if isinstance(node, ast.Call) else node
    return node.id if isinstance(node, ast.Name) else ""


def test_no_file_is_longer_than_the_house_allows(sources, checkout) -> None:
    """Source, tests and samples: a file of more than 400 lines wants another room."""
    tests = [path for folder in ("tests", "sample_runs") for path in (checkout / folder).rglob("*.py")]
    texts = {each.path: each.text for each in sources} | {str(path): path.read_text("utf-8") for path in tests}
    assert {path: text.count("\n") for path, text in texts.items() if text.count("\n") > MOST_LINES} == {}


def test_no_source_has_a_bad_habit(sources) -> None:
    """Errors are caught by their kind, raised with what, where and what next, and nothing is left open."""
    assert {each.path: found for each in sources if (found := bad_habits(each.text))} == {}


def test_every_module_has_a_docstring(sources) -> None:
    """A newcomer reads it before anything else."""
    assert [each.path for each in sources if not ast.get_docstring(ast.parse(each.text))] == []


@pytest.mark.parametrize(
    "text",
    [
        "try:\n    pass\nexcept Exception:\n    pass",
        "try:\n    pass\nexcept (ValueError, BaseException):\n    pass",
        "try:\n    pass\nexcept:\n    pass",
        "raise Exception('no')",
        "raise NotImplementedError",
        "x = 1  # TO" + "DO later",
        "def f():\n    global x\n    x = 1",
    ],
)
def test_the_habit_check_sees_each_bad_habit(text: str) -> None:
    """One snippet each."""
    assert len(bad_habits(text)) == 1
