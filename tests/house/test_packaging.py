"""What pyproject.toml lists is what is there."""

import tomllib
from pathlib import Path

import pytest


def listed(pyproject: str) -> tuple[list[str], dict[str, str]]:
    """The packages, and the folder of each, as pyproject.toml names them."""
    setuptools = tomllib.loads(pyproject)["tool"]["setuptools"]
    return setuptools["packages"], setuptools["package-dir"]


def unlisted(folders: set[str], pyproject: str) -> list[str]:
    """Complaints: folders that are not listed, listed ones that do not exist, and pairs that disagree."""
    packages, places = listed(pyproject)
    expected = {"gainwright." + folder.replace("/", "."): folder for folder in folders}
    found = [f"{name} is not in packages" for name in expected if name not in packages]
    found += [f"{name} is listed and does not exist" for name in packages if name not in expected]
    found += [f"{name} has no or another package-dir" for name, at in expected.items() if places.get(name) != at]
    return found


@pytest.fixture(scope="module")
def folders(checkout: Path) -> set[str]:
    """Every package folder of the three layers."""
    layers = ("ident", "design", "io")
    return {str(each.parent.relative_to(checkout)) for name in layers for each in (checkout / name).rglob("*.py")}


def test_every_package_is_listed_with_its_folder(checkout: Path, folders: set[str]) -> None:
    """A folder left out of pyproject.toml works in an editable install and is missing in a plain one."""
    assert unlisted(folders, (checkout / "pyproject.toml").read_text("utf-8")) == []


def test_every_package_says_that_it_is_typed_and_has_its_docstring_file(checkout: Path, folders: set[str]) -> None:
    """py.typed and __init__.py stand in every package folder."""
    for name in ("py.typed", "__init__.py"):
        assert [folder for folder in folders if not (checkout / folder / name).exists()] == []


def test_files_that_are_not_python_are_packed_too(checkout: Path, folders: set[str]) -> None:
    """Every data file beside the modules has a suffix that package-data names."""
    data = tomllib.loads((checkout / "pyproject.toml").read_text("utf-8"))["tool"]["setuptools"]["package-data"]["*"]
    missing = [
        str(path)
        for folder in folders
        for path in (checkout / folder).iterdir()
        if path.is_file() and path.suffix not in (".py", ".pyc") and not any(path.match(each) for each in data)
    ]
    assert missing == []


def test_the_top_level_holds_what_the_house_allows(checkout: Path) -> None:
    """Nothing else is tracked at the top; no package root, no setup.py, no licence file of its own."""
    ignored = {".git", ".venv", "build", "dist", "gainwright.egg-info", "__pycache__"}
    found = {path.name for path in checkout.iterdir()} - ignored
    visible = {name for name in found if not name.startswith(".")}
    assert visible == {"DEVELOPERS.md", "README.md", "design", "ident", "io", "pyproject.toml", "sample_runs", "tests"}


@pytest.mark.parametrize(
    ("folders_there", "complaint"),
    [
        ({"ident", "design", "design/new"}, "gainwright.design.new is not in packages"),
        ({"ident"}, "gainwright.design is listed and does not exist"),
    ],
)
def test_the_packaging_check_sees_a_difference(folders_there: set[str], complaint: str) -> None:
    """A new folder and a removed one are both found."""
    text = """
    [tool.setuptools]
    packages = ["gainwright.ident", "gainwright.design"]
    [tool.setuptools.package-dir]
    "gainwright.ident" = "ident"
    "gainwright.design" = "design"
    """
    assert complaint in unlisted(folders_there, text)
