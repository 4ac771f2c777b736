"""What the program never does: run or unpickle what it reads, start a shell, reach for a network.

Read from the source, so that it holds for code that no test runs too. What a run opens, writes and connects to is
watched in `tests/faults/test_only_what_was_asked.py`.
"""

import ast
import re
import tomllib
from collections.abc import Iterator
from pathlib import Path

import pytest

UNPICKLERS = {
    "pickle",
    "_pickle",
    "cPickle",
    "dill",
    "cloudpickle",
    "joblib",
    "shelve",
    "marshal",
    "yaml",
    "jsonpickle",
}
RUNNERS = {"code", "codeop", "pty", "runpy", "ctypes", "cffi", "imp"}
NETWORK = {
    "urllib", "urllib3", "http", "httpx", "requests", "aiohttp", "ftplib", "smtplib", "telnetlib", "poplib", "imaplib",
    "socketserver", "ssl", "asyncio", "xmlrpc", "webbrowser", "websocket", "wsgiref", "fsspec", "s3fs",
}  # fmt: skip
CALLS = {
    "eval", "exec", "__import__", "breakpoint", "os.system", "os.popen", "os.startfile", "subprocess.getoutput",
    "subprocess.getstatusoutput", "tempfile.mktemp", "builtins.eval", "builtins.exec",
}  # fmt: skip
METHODS = {"read_pickle", "to_pickle", "query", "eval", "set_trace", "from_string_unsafe"}
# Two files send Python values to a process that the first of them starts itself, through pipes that nobody else has.
OWN_PIPES = {"io/second_process.py", "io/second_process_child.py"}
# Asked for by --scheduler only.
CLUSTER = {"io/plugin/batching.py": {"distributed"}}


def dangers(text: str, path: str = "") -> list[str]:
    """Complaints about one file."""
    tree = ast.parse(text)
    found = [f"line {line}: imports {name}" for line, name in _imports(tree) if _is_barred(name, path)]
    for node in ast.walk(tree):
        if not isinstance(node, ast.Call):
            continue
        name = _dotted(node.func)
        if _is_dangerous(name):
            found.append(f"line {node.lineno}: calls {name}")
        found += [f"line {node.lineno}: {each}" for each in _bad_keywords(node, name.rpartition(".")[2])]
    return found


def _is_dangerous(name: str) -> bool:
    last = name.rpartition(".")[2]
    if last == "compile":
        return name != "re.compile"
    if name.startswith("socket."):
        return name != "socket.gethostname"
    return name in CALLS or ("." in name and last in METHODS) or re.fullmatch(r"os\.(exec|spawn)\w+", name) is not None


def _imports(tree: ast.AST) -> Iterator[tuple[int, str]]:
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            yield from ((node.lineno, alias.name) for alias in node.names)
        elif isinstance(node, ast.ImportFrom) and node.level == 0:
            yield node.lineno, node.module or ""


def _is_barred(name: str, path: str) -> bool:
    first = name.partition(".")[0]
    if name == "urllib.parse":  # quotes a link, and connects to nothing
        return False
    if first == "distributed":
        return first not in CLUSTER.get(path, set())
    return first in RUNNERS | NETWORK or (first in UNPICKLERS and not (first == "pickle" and path in OWN_PIPES))


def _dotted(node: ast.expr) -> str:
    if isinstance(node, ast.Attribute):
        return f"{_dotted(node.value)}.{node.attr}"
    return node.id if isinstance(node, ast.Name) else ""


def _bad_keywords(node: ast.Call, last: str) -> Iterator[str]:
    said = {each.arg: each.value for each in node.keywords}
    for name in ("shell", "allow_pickle"):
        if name in said and not (isinstance(said[name], ast.Constant) and said[name].value is False):
            yield f"{name} is not False"
    if last == "Environment" and not (
        isinstance(said.get("autoescape"), ast.Constant) and said["autoescape"].value is True
    ):
        yield "a template without autoescape"


def test_no_source_runs_what_it_reads(sources) -> None:
    """No pickle of anything from outside, no eval or exec, no shell, no network, no template that doesn't escape."""
    assert {each.path: found for each in sources if (found := dangers(each.text, each.path))} == {}


def test_what_may_pickle_opens_no_file(sources) -> None:
    """The exemption is for pipes: those files neither open a file nor take a path."""
    texts = {each.path: each.text for each in sources if each.path in OWN_PIPES}
    for path, text in texts.items():
        calls = {_dotted(node.func) for node in ast.walk(ast.parse(text)) if isinstance(node, ast.Call)}
        assert not calls & {"open", "Path", "os.open", "io.open"}, path


def test_every_process_that_is_started_is_this_python(sources) -> None:
    """A list that begins with sys.executable, never a program found by its name."""
    started = [
        (each.path, node)
        for each in sources
        for node in ast.walk(ast.parse(each.text))
        if isinstance(node, ast.Call) and re.fullmatch(r"subprocess\.(Popen|run|call|check_\w+)", _dotted(node.func))
    ]
    assert started
    for path, node in started:
        assert isinstance(node.args[0], ast.List), path
        assert _dotted(node.args[0].elts[0]) == "sys.executable", path


@pytest.mark.parametrize(
    "text",
    [
        "import pickle",
        "from yaml import load",
        "import urllib.request",
        "def f():\n    import requests",
        "import distributed",
        "eval('1')",
        "exec(text)",
        "compile(text, '', 'exec')",
        "import os\nos.system('ls')",
        "import os\nos.execv('/bin/sh', [])",
        "import subprocess\nsubprocess.run('ls', shell=True)",
        "import subprocess\nsubprocess.run(['ls'], shell=wish)",
        "frame.query(text)",
        "np.load(file, allow_pickle=True)",
        "import socket\nsocket.create_connection(('x', 1))",
        "jinja2.Environment(loader=None)",
    ],
)
def test_the_safety_check_sees_each_danger(text: str) -> None:
    """One snippet each."""
    assert len(dangers(text)) == 1


def unbounded(pyproject: str) -> list[str]:
    """Requirements without a lower bound."""
    project = tomllib.loads(pyproject)["project"]
    wanted = [
        *project["dependencies"],
        *(each for extra in project["optional-dependencies"].values() for each in extra),
    ]
    return [each for each in wanted if not each.startswith("gainwright[") and not re.match(r"[\w.\[\]-]+>=\d", each)]


def test_every_dependency_has_a_lower_bound(checkout: Path) -> None:
    """An old release with a known hole is never good enough."""
    assert unbounded((checkout / "pyproject.toml").read_text("utf-8")) == []


def test_the_bound_check_sees_a_missing_one() -> None:
    """Plain names, and upper bounds alone."""
    text = '[project]\ndependencies = ["a>=1.0", "b", "c<2"]\n[project.optional-dependencies]\nx = ["d"]\n'
    assert unbounded(text) == ["b", "c<2", "d"]
