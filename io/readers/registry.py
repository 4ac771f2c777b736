"""Which reader reads which file: by content first, by suffix second."""

import functools
from importlib.metadata import EntryPoint, entry_points
from pathlib import Path

from ...ident.errors import GainwrightError, RecordError
from .port import Reader

GROUP = "gainwright.readers"
HEAD_BYTES = 65536
_BUILT_IN = "gainwright.io.readers."
_TEXT = _BUILT_IN + "csv:"


@functools.lru_cache(maxsize=1)
def readers() -> tuple[Reader, ...]:
    """Every installed reader, one of each entry point of the group "gainwright.readers".

    Readers of other packages are asked first: they know special formats. The built-in one for text takes any text and
    is asked last.

    Raises
    ------
    GainwrightError
        When a reader can't be loaded or doesn't fit the port.
    """
    return tuple(_load(point) for point in sorted(entry_points(group=GROUP), key=_rank))


def _rank(point: EntryPoint) -> tuple[bool, bool, str]:
    return point.value.startswith(_TEXT), point.value.startswith(_BUILT_IN), point.name


def _load(point: EntryPoint) -> Reader:
    where = f'entry point "{point.name}" of group {GROUP}'
    try:
        reader = point.load()()
    except (ImportError, AttributeError, TypeError) as problem:
        raise GainwrightError("this reader can't be loaded", where=where, found=str(problem)) from problem
    if not isinstance(reader, Reader):
        raise GainwrightError(
            "this reader doesn't fit the port",
            where=where,
            found=type(reader).__name__,
            expected="name, suffixes, recognises, channels and read",
        )
    return reader


def reader_of(file: Path) -> Reader:
    """The reader for a file.

    Raises
    ------
    RecordError
        When the file can't be opened, is empty, or no reader knows it.
    """
    head = _head(file)
    for reader in readers():
        if reader.recognises(head):
            return reader
    for reader in readers():
        if file.suffix.lower() in reader.suffixes:
            return reader
    raise RecordError(
        "no reader knows this file",
        where=str(file),
        found=f"it starts with {head[:16]!r}",
        expected="a log of one of: " + ", ".join(reader.name for reader in readers()),
    )


def _head(file: Path) -> bytes:
    try:
        with file.open("rb") as log:
            head = log.read(HEAD_BYTES)
    except OSError as problem:
        found = problem.strerror or str(problem)
        raise RecordError("the log can't be opened", where=str(file), found=found) from problem
    if not head:
        raise RecordError("the log is empty", where=str(file), found="0 bytes", expected="a header and samples")
    return head
