"""The source tree as the house tests read it."""

from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

import pytest

LAYERS = ("ident", "design", "io")


@dataclass(frozen=True)
class Source:
    """One Python file of the package: its path below the checkout, its module name, its text."""

    path: str
    module: str
    text: str


@pytest.fixture(scope="session")
def checkout() -> Path:
    """The checkout's top folder."""
    return Path(__file__).resolve().parents[2]


@pytest.fixture(scope="session")
def sources(checkout: Path) -> tuple[Source, ...]:
    """Every Python file of the three layers; an empty answer would make every house test pass, and is an error."""
    found = tuple(_walk(checkout))
    assert len(found) > 50, f"only {len(found)} source files found below {checkout}"
    return found


def _walk(checkout: Path) -> Iterator[Source]:
    for layer in LAYERS:
        for path in sorted((checkout / layer).rglob("*.py")):
            relative = path.relative_to(checkout)
            parts = relative.with_suffix("").parts
            name = ".".join(("gainwright", *(parts[:-1] if parts[-1] == "__init__" else parts)))
            yield Source(str(relative), name, path.read_text("utf-8"))
