"""Text logs: one row a sample, columns parted by a sign."""

from collections.abc import Iterator, Sequence
from dataclasses import replace
from pathlib import Path

from .csv_dialect import Column, CsvDialect, decode
from .csv_rows import Rows, head_of, lines_in, parts_of_rows, whole_rows
from .csv_values import parse
from .port import ChannelInfo, Hints, Log, find_channel
from .stamps import Stamps

LARGE = 512 << 20  # bytes: of a larger log only the head is looked at for its columns


class CsvReader:
    """Reader of text logs."""

    name = "text with columns (CSV)"
    suffixes = (".csv", ".txt", ".tsv", ".dat", ".log", ".asc")

    def recognises(self, head: bytes) -> bool:
        """Text: no zero bytes unless it is UTF-16, and hardly any control signs."""
        text, encoding = decode(head)
        if "\x00" in text.rstrip("\x00") or (encoding == "cp1252" and b"\x00" in head):
            return False
        controls = sum(sign < " " and sign not in "\t\r\n\f\x1a" for sign in text)
        return controls <= len(text) // 1000

    def channels(self, file: Path, hints: Hints) -> tuple[ChannelInfo, ...]:
        """The columns, in their order; a column can also be named by its number or by its header as written."""
        if file.exists() and file.stat().st_size > LARGE:
            return _infos(head_of(file, hints)[0], None)
        rows = whole_rows(file, hints)
        return _infos(rows.dialect, len(rows.lines))

    def read(self, file: Path, sources: Sequence[str], hints: Hints) -> Log:
        """Read the named columns as float64; stamps become seconds from the first one."""
        rows = whole_rows(file, hints)
        return _log(file, rows, _indices(file, sources, rows.dialect), hints, {})

    def rows(self, file: Path, sources: Sequence[str], hints: Hints) -> int:
        """Bytes over the mean length of a row, by looks at eight places."""
        dialect, _, _ = head_of(file, hints)
        _indices(file, sources, dialect)
        return lines_in(file)

    def chunks(self, file: Path, sources: Sequence[str], hints: Hints, rows: int) -> Iterator[Log]:
        """The named columns, about `rows` samples at a time."""
        clocks: dict[int, Stamps] = {}
        for part in parts_of_rows(file, hints, rows):
            yield _log(file, part, _indices(file, sources, part.dialect), hints, clocks)


def _indices(file: Path, sources: Sequence[str], dialect: CsvDialect) -> dict[str, int]:
    infos = _infos(dialect, None)
    return {source: infos.index(find_channel(file, source, infos)) for source in sources}


def _log(file: Path, rows: Rows, indices: dict[str, int], hints: Hints, clocks: dict[int, Stamps]) -> Log:
    values = parse(file, rows, sorted(set(indices.values())), hints, clocks)
    return Log({source: replace(values[index], name=source) for source, index in indices.items()}, rows.findings)


def _infos(dialect: CsvDialect, samples: int | None) -> tuple[ChannelInfo, ...]:
    names = {column.name for column in dialect.columns}
    return tuple(
        ChannelInfo(column.name, column.unit, samples, _aliases(column, number, names))
        for number, column in enumerate(dialect.columns, 1)
    )


def _aliases(column: Column, number: int, names: set[str]) -> tuple[str, ...]:
    by_number = () if str(number) in names else (str(number),)
    return (column.written, *by_number)
