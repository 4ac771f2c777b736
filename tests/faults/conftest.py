"""Lets the helpers be imported by their names, and keeps an eye on the logs of every test."""

import sys
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest

HERE = Path(__file__).resolve().parent
if str(HERE) not in sys.path:
    sys.path.insert(0, str(HERE))

Keep = Callable[[Path], None]


@pytest.fixture
def untouched() -> Iterator[Keep]:
    """Names logs whose bytes and time of change must be the same after the test."""
    before: dict[Path, tuple[bytes, int]] = {}

    def keep(*files: Path) -> None:
        before.update({file: (file.read_bytes(), file.stat().st_mtime_ns) for file in files})

    yield keep
    assert before, "no log was named"
    assert {file: (file.read_bytes(), file.stat().st_mtime_ns) for file in before} == before
