"""Logs that are too large to be read at once, read part by part."""

from collections.abc import Iterator, Sequence
from pathlib import Path

from .port import ChunkedReader, Hints, Log, Reader

LARGEST_WHOLE = 5_000_000  # samples of a channel that are read at once
PART = 1_000_000  # samples at a time beyond it
_LEAST_BYTES = 1  # a sample at least, however well it was packed


def is_large(reader: Reader, file: Path, sources: Sequence[str], hints: Hints) -> bool:
    """Whether a log has more samples than are read at once, and its reader can read it in parts.

    Raises
    ------
    RecordError, RequestError
        As when it is read.
    """
    if not isinstance(reader, ChunkedReader) or file.stat().st_size < _LEAST_BYTES * LARGEST_WHOLE:
        return False
    return reader.rows(file, sources, hints) > LARGEST_WHOLE


def in_parts(reader: Reader, file: Path, sources: Sequence[str], hints: Hints) -> Iterator[Log]:
    """A log whole, or in parts where it is large.

    Raises
    ------
    RecordError, RequestError
        As when it is read.
    """
    if isinstance(reader, ChunkedReader) and is_large(reader, file, sources, hints):
        yield from reader.chunks(file, sources, hints, PART)
    else:
        yield reader.read(file, sources, hints)
