"""The layers: ident <- design <- io, never the other way, and no file opened in the inner two."""

import ast
from collections.abc import Iterator

import pytest

RANK = {"ident": 0, "design": 1, "io": 2}
FILE_MODULES = {"pathlib", "os", "shutil", "tempfile", "h5py", "io", "csv", "glob", "fileinput", "mmap", "sqlite3"}
FILE_CALLS = {
    "open", "read_text", "read_bytes", "write_text", "write_bytes", "read_csv", "read_table", "read_hdf", "read_excel",
    "read_json", "read_parquet", "to_csv", "to_hdf", "loadtxt", "genfromtxt", "savetxt", "fromfile", "tofile", "savez",
    "save", "load", "memmap", "savefig", "iterdir", "unlink", "mkdir", "touch",
}  # fmt: skip


def absolute_imports(text: str, module: str, *, is_package: bool = False) -> Iterator[tuple[int, str]]:
    """(line, absolute module) of every import, wherever it stands, importlib calls with a literal name included."""
    package = module.split(".") if is_package else module.split(".")[:-1]
    for node in ast.walk(ast.parse(text)):
        if isinstance(node, ast.Import):
            yield from ((node.lineno, alias.name) for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            base = package[: len(package) - node.level + 1] if node.level else []
            stem = [*base, *(node.module.split(".") if node.module else [])]
            yield from ((node.lineno, ".".join([*stem, alias.name])) for alias in node.names)
        elif isinstance(node, ast.Call) and _called(node) in ("import_module", "__import__"):
            yield from ((node.lineno, each.value) for each in node.args if _is_text(each))


def upward_imports(text: str, module: str, *, is_package: bool = False) -> list[str]:
    """Imports of a layer above the module's own."""
    own = RANK[module.split(".")[1]]
    found = []
    for line, name in absolute_imports(text, module, is_package=is_package):
        parts = name.split(".")
        if parts[0] == "gainwright" and len(parts) > 1 and RANK.get(parts[1], 0) > own:
            found.append(f"{module}:{line} imports {name}")
    return found


def file_touches(text: str, module: str) -> list[str]:
    """Imports and calls that open, read or write files."""
    found = [
        f"{module}:{line} imports {name}"
        for line, name in absolute_imports(text, module)
        if name.split(".")[0] in FILE_MODULES
    ]
    calls = [node for node in ast.walk(ast.parse(text)) if isinstance(node, ast.Call)]
    found += [f"{module}:{node.lineno} calls {_called(node)}" for node in calls if _called(node) in FILE_CALLS]
    return found


def _called(node: ast.Call) -> str:
    if isinstance(node.func, ast.Attribute):
        return node.func.attr
    return node.func.id if isinstance(node.func, ast.Name) else ""


def _is_text(node: ast.expr) -> bool:
    return isinstance(node, ast.Constant) and isinstance(node.value, str)


def test_no_import_runs_upwards(sources) -> None:
    """ident imports neither design nor io; design does not import io."""
    found = [
        line
        for each in sources
        for line in upward_imports(each.text, each.module, is_package=each.path.endswith("__init__.py"))
    ]
    assert found == []


def test_the_inner_layers_open_no_file(sources) -> None:
    """ident and design compute on values; whatever touches files lives in io."""
    inner = [each for each in sources if not each.path.startswith("io/")]
    assert [line for each in inner for line in file_touches(each.text, each.module)] == []


def test_inside_the_package_every_import_is_relative(sources) -> None:
    """An absolute import of gainwright would tie the layers to the name of the distribution."""
    found = [
        f"{each.path}:{node.lineno}"
        for each in sources
        for node in ast.walk(ast.parse(each.text))
        if (isinstance(node, ast.ImportFrom) and node.level == 0 and (node.module or "").split(".")[0] == "gainwright")
        or (isinstance(node, ast.Import) and any(alias.name.split(".")[0] == "gainwright" for alias in node.names))
    ]
    assert found == []


@pytest.mark.parametrize(("library", "door"), [("lmfit", "ident/"), ("pint", "io/units.py")])
def test_a_library_behind_a_door_is_imported_there_only(sources, library: str, door: str) -> None:
    """lmfit is used by identification alone and by one file of it, pint by units.py alone."""
    users = [
        each.path
        for each in sources
        if any(name.split(".")[0] == library for _, name in absolute_imports(each.text, each.module))
    ]
    assert len(users) == 1
    assert users[0].startswith(door)


@pytest.mark.parametrize(
    "text",
    [
        "from ..io import record",
        "from ...io.record import Record",
        "from .. import design",
        "import gainwright.io.units",
        "def late():\n    from ..design.gains import Gains\n",
        "import importlib\nimportlib.import_module('gainwright.io.job')",
    ],
)
def test_the_layer_check_sees_an_upward_import(text: str) -> None:
    """Each snippet, put into ident, is found; the deeper relative one from a sub-package of ident."""
    module = "gainwright.ident.health.gaps" if text.startswith("from ...") else "gainwright.ident.fit"
    assert len(upward_imports(text, module)) == 1


def test_the_layer_check_lets_a_downward_import_pass() -> None:
    """design may use ident, a package's own files and libraries."""
    text = "from ..ident.run import Run\nfrom .gains import Gains\nimport numpy"
    assert upward_imports(text, "gainwright.design.margins") == []


def test_the_layer_check_resolves_imports_of_a_package_file() -> None:
    """In an __init__.py one dot is the package itself, in a module its package."""
    assert upward_imports("from .io import job", "gainwright.ident", is_package=True) == []
    assert len(upward_imports("from .io import job", "gainwright.ident")) == 1
    assert len(upward_imports("from ...io import job", "gainwright.ident.health", is_package=True)) == 1


@pytest.mark.parametrize(
    "text",
    [
        "handle = open('log.csv')",
        "from pathlib import Path",
        "import pandas as pd\ntable = pd.read_csv(where)",
        "import h5py",
        "text = where.read_text()",
        "import numpy as np\ntable = np.loadtxt(where)",
        "figure.savefig('step.svg')",
    ],
)
def test_the_file_check_sees_an_opened_file(text: str) -> None:
    """Each snippet, put into design, is found."""
    assert file_touches(text, "gainwright.design.step_metrics")
