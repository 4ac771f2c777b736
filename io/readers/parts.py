"""Logs that are too large to be read at once, read part by part."""

from collections.abc import Iterator, Sequence
from pathlib import Path

from .port import ChunkedReader, Hints, Log, Reader

LARGEST_WHOLE = 5_000_000  # samples of a channel that are read at once
PART = 1_000_000  # samples at a time beyond it
_LEAST_BYTES = 1  # a sample at least, however well it was packed


def large(reader: Reader, file: Path, sources: Sequence[str], hints: Hints) -> int | None:
    """About how many samples a log has that is too large to be read at once; None where it is not, or has to be.

    Raises
    ------
    RecordError, RequestError
        As when it is read.
    """
    if not isinstance(reader, ChunkedReader) or file.stat().st_size < _LEAST_BYTES * LARGEST_WHOLE:
        return None
    rows = reader.rows(file, sources, hints)
    return rows if rows > LARGEST_WHOLE else None


def in_parts(reader: Reader, file: Path, sources: Sequence[str], hints: Hints) -> Iterator[Log]:
    """A log whole, or in parts where it is large.

    Raises
    ------
    RecordError, RequestError
        As when it is read.
    """
    if isinstance(reader, ChunkedReader) and large(reader, file, sources, hints) is not None:
        yield from reader.chunks(file, sources, hints, PART)
    else:
        yield reader.read(file, sources, hints)
