"""The rows of samples of a text log: whole, or part by part."""

from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import TextIO

from ...ident.errors import RecordError
from ..record import Finding
from .cells import is_number, is_stamp, is_word
from .csv_dialect import CsvDialect, decode, sniff, split
from .port import Hints

SNIFFED_LINES = 600
SNIFFED_BYTES = 1 << 20
FOOTER_LINES = 20
LONGEST_LINE = 1 << 20
LOOKS, LOOKED_BYTES = 8, 1 << 16


@dataclass(frozen=True)
class Rows:
    """The rows of samples of one log or of a part of it, every one with the same number of fields.

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


def whole_rows(file: Path, hints: Hints) -> Rows:
    """Every row of a log.

    Raises
    ------
    RecordError
        When it can't be opened, isn't text, or its rows differ in their number of fields.
    """
    text = _text(file, hints)
    findings: list[Finding] = []
    if text.endswith("\x00"):
        findings.append(_zero_bytes(len(text) - len(text.rstrip("\x00"))))
        text = text.rstrip("\x00")
    text = text.replace("\r\n", "\n").replace("\r", "\n").rstrip("\x1a\f")
    lines = text.split("\n")
    dialect = sniff(lines[:SNIFFED_LINES], hints.dialect, str(file))
    rows = _rows(file, lines, 1, dialect, findings, last=True)
    if not rows.lines:
        raise _no_rows(file)
    return rows


def parts_of_rows(file: Path, hints: Hints, rows: int) -> Iterator[Rows]:
    """The same, about `rows` rows at a time."""
    dialect, encoding, width = head_of(file, hints)
    errors = "replace" if hints.dialect.encoding is None else "strict"
    number, carried, zeros, came = 1, "", 0, False
    with file.open(encoding=encoding, errors=errors) as log:
        while text := _block(log, rows * width, file):
            *lines, begun = (carried + text).split("\n")
            zeros += len(begun) - len(begun.rstrip("\x00"))
            begun = begun.rstrip("\x00")
            if len(begun) > LONGEST_LINE:
                raise RecordError("a line is too long", where=f"{file}, line {number}", found=f"{len(begun)} signs")
            end = max(0, len(lines) - FOOTER_LINES - 1)  # what may be text under the samples waits for the next part
            part = _rows(file, lines[:end], number, dialect, [], last=False)
            number, carried = number + end, "\n".join([*lines[end:], begun])
            if part.lines:
                came = True
                yield part
    findings = [_zero_bytes(zeros)] if zeros else []
    part = _rows(file, carried.rstrip("\x1a\f").split("\n"), number, dialect, findings, last=True)
    if part.lines:
        yield part
    elif not came:
        raise _no_rows(file)


def _rows(
    file: Path, lines: list[str], first: int, dialect: CsvDialect, findings: list[Finding], *, last: bool
) -> Rows:
    """Rows out of lines of which the first has this number in the file; `last`: the file ends with them."""
    above = max(0, dialect.first + 1 - first)
    kept = [
        (number, line)
        for number, line in enumerate(lines[above:], first + above)
        if line.strip() and not line.lstrip().startswith("#")
    ]
    if last and lines[-1] != "" and len(kept) > 1 and kept[-1][0] == first + len(lines) - 1:
        number, _ = kept.pop()
        findings.append(
            Finding(
                "partial last line",
                f"line {number}",
                "1 sample",
                "left out: no line end follows, so its last number may be cut",
            )
        )
    if last:
        kept = _without_footer(kept, dialect, findings)
    _require_equal_fields(file, kept, dialect)
    return Rows(dialect, [line for _, line in kept], [number for number, _ in kept], tuple(findings))


def head_of(file: Path, hints: Hints) -> tuple[CsvDialect, str, int]:
    """Dialect and encoding of a log by its head, and how many signs a row has there."""
    try:
        with file.open("rb") as log:
            content = log.read(SNIFFED_BYTES)
    except OSError as problem:
        raise _unopened(file, problem) from problem
    text, encoding = decode(content, hints.dialect.encoding)
    lines = text.replace("\r\n", "\n").replace("\r", "\n").split("\n")[:SNIFFED_LINES]
    dialect = sniff(lines, hints.dialect, str(file))
    rows = lines[dialect.first : -1]
    width = sum(len(line) + 1 for line in rows) // max(1, len(rows))
    return dialect, "utf-8-sig" if encoding == "utf-8" else encoding, max(2, width)


def lines_in(file: Path) -> int:
    """About how many lines a log has, by looks at eight places; line ends of one sign."""
    size = file.stat().st_size
    seen = ends = 0
    with file.open("rb") as log:
        for place in range(LOOKS):
            log.seek(size * place // LOOKS)
            block = log.read(LOOKED_BYTES)
            seen += len(block)
            ends += max(block.count(b"\n"), block.count(b"\r"))
    return round(size * ends / max(1, seen))


def _block(log: TextIO, signs: int, file: Path) -> str:
    try:
        return log.read(signs)
    except UnicodeDecodeError as problem:
        raise RecordError("the log is not in the stated encoding", where=str(file), found=str(problem)) from problem
    except OSError as problem:
        raise _unopened(file, problem) from problem


def _unopened(file: Path, problem: OSError) -> RecordError:
    found = problem.strerror or str(problem)
    return RecordError("the log can't be opened", where=str(file), found=found)


def _no_rows(file: Path) -> RecordError:
    return RecordError("the log has no whole row of samples", where=str(file), expected="two rows at least")


def _zero_bytes(count: int) -> Finding:
    return Finding("zero bytes", "end of the file", f"{count} bytes", "left out: the log was not closed")


def _text(file: Path, hints: Hints) -> str:
    try:
        content = file.read_bytes()
    except OSError as problem:
        raise _unopened(file, problem) from problem
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
