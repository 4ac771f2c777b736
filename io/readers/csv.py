"""Text logs: one row a sample, columns parted by a sign."""

import io
from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from ...ident.errors import RecordError
from ...ident.run import FloatArray
from ..record import Finding
from .cells import WORDS, has_thousands, is_number, is_stamp, is_word
from .csv_dialect import Column, CsvDialect, decode, sniff, split
from .port import Channel, ChannelInfo, Hints, Log, find_channel
from .stamps import seconds_of

SNIFFED_LINES = 600
FOOTER_LINES = 20


@dataclass(frozen=True)
class _Rows:
    """The rows of samples of one log, every one with the same number of fields.

    Attributes
    ----------
    lines : list of str
    numbers : list of int
        Line of each row in the file, from 1.
    """

    dialect: CsvDialect
    lines: list[str]
    numbers: list[int]
    findings: tuple[Finding, ...]


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
        rows = _rows(file, hints)
        return _infos(rows.dialect, len(rows.lines))

    def read(self, file: Path, sources: Sequence[str], hints: Hints) -> Log:
        """Read the named columns as float64; stamps become seconds from the first one."""
        rows = _rows(file, hints)
        infos = _infos(rows.dialect, len(rows.lines))
        indices = {source: infos.index(find_channel(file, source, infos)) for source in sources}
        values = _parse(file, rows, sorted(set(indices.values())), hints)
        return Log({source: replace(values[index], name=source) for source, index in indices.items()}, rows.findings)


def _infos(dialect: CsvDialect, samples: int) -> tuple[ChannelInfo, ...]:
    names = {column.name for column in dialect.columns}
    return tuple(
        ChannelInfo(column.name, column.unit, samples, _aliases(column, number, names))
        for number, column in enumerate(dialect.columns, 1)
    )


def _aliases(column: Column, number: int, names: set[str]) -> tuple[str, ...]:
    by_number = () if str(number) in names else (str(number),)
    return (column.written, *by_number)


def _rows(file: Path, hints: Hints) -> _Rows:
    text = _text(file, hints)
    findings: list[Finding] = []
    if text.endswith("\x00"):
        findings.append(
            Finding(
                "zero bytes",
                "end of the file",
                f"{len(text) - len(text.rstrip(chr(0)))} bytes",
                "left out: the log was not closed",
            )
        )
        text = text.rstrip("\x00")
    text = text.replace("\r\n", "\n").replace("\r", "\n").rstrip("\x1a\f")
    lines = text.split("\n")
    whole = lines[-1] == ""
    dialect = sniff(lines[:SNIFFED_LINES], hints.dialect, str(file))
    kept = [
        (number, line)
        for number, line in enumerate(lines[dialect.first :], dialect.first + 1)
        if line.strip() and not line.lstrip().startswith("#")
    ]
    if not whole and len(kept) > 1 and kept[-1][0] == len(lines):
        number, _ = kept.pop()
        findings.append(
            Finding(
                "partial last line",
                f"line {number}",
                "1 sample",
                "left out: no line end follows, so its last number may be cut",
            )
        )
    kept = _without_footer(kept, dialect, findings)
    _require_equal_fields(file, kept, dialect)
    if not kept:
        raise RecordError("the log has no whole row of samples", where=str(file), expected="two rows at least")
    return _Rows(dialect, [line for _, line in kept], [number for number, _ in kept], tuple(findings))


def _text(file: Path, hints: Hints) -> str:
    try:
        content = file.read_bytes()
    except OSError as problem:
        found = problem.strerror or str(problem)
        raise RecordError("the log can't be opened", where=str(file), found=found) from problem
    try:
        return decode(content, hints.dialect.encoding)[0]
    except UnicodeDecodeError as problem:
        line = content[: problem.start].count(b"\n") + 1
        raise RecordError(
            f"the log is not in {hints.dialect.encoding}",
            where=f"{file}, line {line}",
            found=repr(content[problem.start : problem.end]),
            expected="another log.encoding, or none for a guess",
        ) from problem


def _fields(line: str, dialect: CsvDialect) -> int:
    if dialect.separator == " " or '"' in line:
        return len(split(line, dialect.separator))
    return line.count(dialect.separator) + 1


def _without_footer(kept: list[tuple[int, str]], dialect: CsvDialect, findings: list[Finding]) -> list[tuple[int, str]]:
    """Leave text under the samples out, and say so."""
    width = dialect.width + dialect.trailing
    end = len(kept)
    while end > 0 and len(kept) - end < FOOTER_LINES and _is_text(kept[end - 1][1], width, dialect):
        end -= 1
    if 0 < end < len(kept):
        findings.append(
            Finding("text under the samples", f"line {kept[end][0]}", f"{len(kept) - end} lines", "left out")
        )
        return kept[:end]
    return kept


def _is_text(line: str, width: int, dialect: CsvDialect) -> bool:
    cells = split(line, dialect.separator)
    if len(cells) == width:
        return not any(is_number(cell, dialect.decimal) or is_word(cell) or is_stamp(cell) for cell in cells)
    return not is_number(cells[0], dialect.decimal) and not is_stamp(cells[0])


def _require_equal_fields(file: Path, kept: list[tuple[int, str]], dialect: CsvDialect) -> None:
    width = dialect.width + dialect.trailing
    for number, line in kept:
        count = _fields(line, dialect)
        if count != width:
            raise RecordError(
                "this row has another number of fields than the others",
                where=f"{file}, line {number}",
                found=f"{count} fields: {line[:80]}",
                expected=f"{width} fields, as in line {dialect.first + 1}",
                advice="mend the logger or cut the line out of a copy; if the guess of the separator is wrong, say it "
                "under [log]",
            )


def _parse(file: Path, rows: _Rows, wanted: list[int], hints: Hints) -> dict[int, Channel]:
    first = split(rows.lines[0], rows.dialect.separator)
    stamped = [index for index in wanted if is_stamp(first[index])]
    numeric = [index for index in wanted if index not in stamped]
    values = _fast(rows, numeric, hints) if numeric else {}
    if values is None:
        values = {index: _slow(file, rows, index, hints) for index in numeric}
    columns = rows.dialect.columns
    channels = {index: Channel(columns[index].name, values[index], columns[index].unit) for index in numeric}
    for index in stamped:
        texts = [split(line, rows.dialect.separator)[index] for line in rows.lines]
        seconds = seconds_of(texts, f'{file}, column "{columns[index].name}"', rows.numbers[0])
        channels[index] = Channel(columns[index].name, seconds, "s", stamps=True)
    return channels


def _fast(rows: _Rows, wanted: list[int], hints: Hints) -> dict[int, FloatArray] | None:
    """The numbers by pandas; None when a cell is neither a number nor a usual word."""
    import pandas as pd

    dialect = rows.dialect
    words = {form for word in WORDS for form in (word, word.upper(), word.capitalize())} | set(
        hints.dialect.not_a_number
    )
    try:
        table = pd.read_csv(
            io.StringIO("\n".join(rows.lines)),
            header=None,
            names=list(range(dialect.width + dialect.trailing)),
            index_col=False,
            usecols=wanted,
            dtype=np.float64,
            sep=r"\s+" if dialect.separator == " " else dialect.separator,
            decimal=dialect.decimal,
            na_values=sorted(words),
            skipinitialspace=True,
            skip_blank_lines=False,
        )
    except ValueError:
        return None
    return {index: _finite(table[index].to_numpy(dtype=np.float64)) for index in wanted}


def _finite(values: FloatArray) -> FloatArray:
    return np.where(np.isfinite(values), values, np.nan)


def _slow(file: Path, rows: _Rows, index: int, hints: Hints) -> FloatArray:
    """One column cell by cell, with the line of the first one that can't be read.

    The head of a log may have whole numbers only, so that the other decimal sign gets a trial as well.
    """
    cells = [split(line, rows.dialect.separator)[index] for line in rows.lines]
    decimal = rows.dialect.decimal
    if any(not _readable(cell, decimal, hints) for cell in cells):
        other = "," if decimal == "." else "."
        if rows.dialect.separator != other and all(_readable(cell, other, hints) for cell in cells):
            decimal = other
    values = np.empty(len(cells))
    for row, cell in enumerate(cells):
        if is_number(cell, decimal):
            values[row] = float(cell.replace(",", ".").replace("D", "E").replace("d", "e"))
        elif is_word(cell, hints.dialect.not_a_number):
            values[row] = np.nan
        else:
            raise _unreadable(file, rows, index, row, cell)
    return _finite(values)


def _readable(cell: str, decimal: str, hints: Hints) -> bool:
    return is_number(cell, decimal) or is_word(cell, hints.dialect.not_a_number)


def _unreadable(file: Path, rows: _Rows, index: int, row: int, cell: str) -> RecordError:
    advice = f'if it stands for a lost sample, add not_a_number = ["{cell}"] under [log] in the rig file'
    if has_thousands(cell):
        advice = "let the logger write numbers without separated thousands"
    return RecordError(
        "this cell is not a number",
        where=f'{file}, line {rows.numbers[row]}, column "{rows.dialect.columns[index].name}"',
        found=f'"{cell}"',
        expected=f"a number with '{rows.dialect.decimal}' as decimal sign",
        advice=advice,
    )
