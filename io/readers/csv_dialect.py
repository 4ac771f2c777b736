"""How a text log is written: encoding, separator, decimal sign, where the header, the units and the samples stand."""

import csv
import re
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import pairwise

from ...ident.errors import RecordError
from .. import units
from ..rigfile.rig import LogDialect
from ..unit_names import AMBIGUOUS
from .cells import is_number, is_stamp, is_word

SEPARATORS = (",", ";", "\t", "|", " ")
_BRACKETS = re.compile(r"(.*?)\s*(?:\[([^\]]*)\]|\(((?:[^()]|\([^()]*\))*)\)|\s/\s+(\S+))\s*")
_HEADER_WORD = re.compile(r"\S+(?:\s*(?:\[[^\]]*\]|\([^)]*\)))?")


@dataclass(frozen=True)
class Column:
    """One column: its bare name, the unit the log states, and the header as written."""

    name: str
    unit: str | None
    written: str


@dataclass(frozen=True)
class CsvDialect:
    """How a text log is written.

    Attributes
    ----------
    separator, decimal : str
        " " stands for any run of blanks.
    width : int
        Fields in a row of samples, a trailing separator left out.
    trailing : bool
        Rows of samples end with a separator.
    first : int
        Index of the first row of samples among the lines, from 0.
    columns : tuple of Column, length width
    """

    separator: str
    decimal: str
    width: int
    trailing: bool
    first: int
    columns: tuple[Column, ...] = ()


def decode(content: bytes, encoding: str | None = None) -> tuple[str, str]:
    """Text and encoding of a log; UTF-16 by its mark or its zero bytes, else UTF-8, else cp1252.

    Raises
    ------
    UnicodeDecodeError
        Only when an encoding was named and doesn't fit.
    """
    if encoding is not None:
        return _decoded(content, encoding).removeprefix("\ufeff"), encoding
    if content.startswith((b"\xff\xfe", b"\xfe\xff")):
        return content.decode("utf-16", errors="replace"), "utf-16"
    head = content[:2000]
    if head[1::2].count(0) > 0.8 * len(head[1::2]):
        return content.decode("utf-16-le", errors="replace"), "utf-16-le"
    try:
        return content.decode("utf-8-sig"), "utf-8"
    except UnicodeDecodeError as problem:
        if problem.end >= len(content) and problem.reason == "unexpected end of data":
            return content[: problem.start].decode("utf-8-sig"), "utf-8"
    return content.decode("cp1252", errors="replace"), "cp1252"


def _decoded(content: bytes, encoding: str) -> str:
    try:
        return content.decode(encoding)
    except UnicodeDecodeError:
        raise
    except UnicodeError as problem:  # codecs that are not of a charset don't say where
        raise UnicodeDecodeError(encoding, content, 0, 1, str(problem)) from problem


def split(line: str, separator: str) -> list[str]:
    """The fields of a line; quotes hold separators together."""
    if separator == " ":
        return line.split()
    if '"' in line:
        return [field.strip() for field in next(csv.reader([line], delimiter=separator, skipinitialspace=True))]
    return [field.strip() for field in line.split(separator)]


def sniff(lines: Sequence[str], said: LogDialect, where: str) -> CsvDialect:
    """Guess the dialect from the first lines of a log; what the rig file says comes before any guess.

    Parameters
    ----------
    lines : sequence of str
        Without line ends.
    said : LogDialect
    where : str
        The file, for messages.

    Raises
    ------
    RecordError
        When there are no rows of numbers, or the header doesn't fit them.
    """
    start = 0 if said.first_row is None else said.first_row - 1
    quoted = any('"' in line for line in lines)
    candidates = [
        found
        for separator in ([said.separator] if said.separator else _worth_trying(lines))
        for decimal in ([said.decimal] if said.decimal else [".", ","])
        if (separator != decimal or quoted) and (found := _try(lines, start, separator, decimal, said)) is not None
    ]
    if not candidates:
        raise RecordError(
            "no rows of numbers are in this log",
            where=where,
            found=f'first line "{(lines or [""])[0][:80]}"',
            expected="rows of numbers with a separator",
            advice="say separator, decimal and first_row under [log] in the rig file",
        )
    best = max(candidates, key=lambda found: found[0])[1]
    return replace(best, columns=_columns(lines, best, said, where))


def _worth_trying(lines: Sequence[str]) -> list[str]:
    """Separators that occur, and one of those that don't, which all give the same reading; any blank is one for " "."""
    text = "\n".join(lines)
    absent = [separator for separator in SEPARATORS if separator not in text and separator != " "]
    return [separator for separator in SEPARATORS if separator not in absent[1:]]


def _try(
    lines: Sequence[str], start: int, separator: str, decimal: str, said: LogDialect
) -> tuple[float, CsvDialect] | None:
    """Score of one reading of the lines: cells that are numbers count for it, others against it."""
    rows = [(index, split(line, separator)) for index, line in enumerate(lines) if index >= start and _is_row(line)]
    kinds = {index: tuple(_is_value(cell, decimal, said) for cell in row) for index, row in rows}
    likely = Counter(kind for kind in kinds.values() if 2 * sum(kind) >= len(kind))
    if not likely:
        return None
    pattern = max(likely, key=lambda kind: (likely[kind] * (2 * sum(kind) - len(kind) + 0.5), len(kind)))
    fitting = [index for index, row in rows if _fits(kinds[index], pattern) and _has_number(row, decimal)]
    if not fitting:
        return None
    trailing = (
        separator != " " and len(pattern) > 1 and all(not cells[-1] for index, cells in rows if index in set(fitting))
    )
    width = len(pattern) - trailing
    numbers = sum(sum(kinds[index][:width]) for index in fitting)
    score = 3 * numbers - 2 * width * len(fitting)
    first = _first_row(fitting, [index for index, _ in rows]) if said.first_row is None else start
    trailing = trailing and not _named_last(lines, first, separator, len(pattern))
    width = len(pattern) - trailing
    return score, CsvDialect(separator, decimal, width, trailing, first)


def _named_last(lines: Sequence[str], first: int, separator: str, width: int) -> bool:
    """Whether the header names the last column, so that it is empty rather than absent."""
    above = next((split(line, separator) for line in reversed(lines[:first]) if line.strip()), [])
    return len(above) == width and bool(above[-1])


def _is_row(line: str) -> bool:
    return bool(line.strip()) and not line.lstrip().startswith(("#", "%", "//"))


def _is_value(cell: str, decimal: str, said: LogDialect) -> bool:
    return is_number(cell, decimal) or is_word(cell, said.not_a_number) or is_stamp(cell)


def _has_number(row: Sequence[str], decimal: str) -> bool:
    return any(is_number(cell, decimal) or is_stamp(cell) for cell in row)


def _fits(kind: tuple[bool, ...], pattern: tuple[bool, ...]) -> bool:
    return len(kind) == len(pattern) and all(have or not want for have, want in zip(kind, pattern, strict=True))


def _first_row(fitting: Sequence[int], rows: Sequence[int]) -> int:
    """The first fitting row that is followed by another one, blank lines and comments aside."""
    following = dict(pairwise(rows))
    known = set(fitting)
    return next((index for index in fitting if following.get(index) in known), fitting[0])


def _columns(lines: Sequence[str], found: CsvDialect, said: LogDialect, where: str) -> tuple[Column, ...]:
    header = _header_rows(lines, found, said, where)
    if not header:
        return tuple(Column(str(number), None, str(number)) for number in range(1, found.width + 1))
    names = [_parted(cell) for cell in header[0]]
    if len(header) > 1:
        below = [_bare_unit(cell) for cell in header[1]]
        names = [replace(column, unit=column.unit or unit) for column, unit in zip(names, below, strict=True)]
    return tuple(names)


def _header_rows(lines: Sequence[str], found: CsvDialect, said: LogDialect, where: str) -> list[list[str]]:
    """The header, and the units row under it where there is one."""
    if said.header_row is not None:
        if said.header_row == 0:
            return []
        index = said.header_row - 1
        cells = _header_cells(lines[index], found) if index < len(lines) else []
        if len(cells) != found.width:
            raise _unfit(where, index, cells, found)
        below = [_header_cells(line, found) for line in lines[index + 1 : found.first] if line.strip()]
        return [cells, *[row for row in below if _is_units_row(row, found)][:1]]
    above = [index for index in range(found.first) if lines[index].strip()][-2:]
    if not above:
        return []
    last = _header_cells(lines[above[-1]], found)
    if len(last) != found.width:
        if len(last) > 1 and abs(len(last) - found.width) == 1 and not _is_comment(lines[above[-1]]):
            raise _unfit(where, above[-1], last, found)
        return []
    if len(above) > 1 and _is_units_row(last, found):
        names = _header_cells(lines[above[0]], found)
        if len(names) == found.width:
            return [names, last]
    return [last]


def _is_comment(line: str) -> bool:
    return line.lstrip().startswith(("#", "%", "//"))


def _unfit(where: str, index: int, cells: Sequence[str], found: CsvDialect) -> RecordError:
    return RecordError(
        "header and samples have different numbers of columns",
        where=f"{where}, line {index + 1}",
        found=f"{len(cells)} names, {found.width} columns in line {found.first + 1}",
        expected="one name a column",
        advice="say header_row (0: none) and first_row under [log] in the rig file",
    )


def _header_cells(line: str, found: CsvDialect) -> list[str]:
    text = line.strip()
    if _is_comment(text) and found.separator != "/":
        text = text.lstrip("#%/").strip()
    if found.separator == " ":
        return _HEADER_WORD.findall(text)
    cells = split(text if _is_comment(line) else line, found.separator)
    return cells[:-1] if len(cells) == found.width + 1 and not cells[-1] else cells


def _is_units_row(cells: Sequence[str], found: CsvDialect) -> bool:
    if len(cells) != found.width:
        return False
    stated = [cell for cell in cells if cell]
    known = sum(_looks_like_unit(cell) for cell in stated)
    return bool(stated) and known == len(stated)


def _looks_like_unit(cell: str) -> bool:
    if cell.startswith(("[", "(")) and cell.endswith(("]", ")")):
        return True
    return units.is_known(cell) or cell in AMBIGUOUS


def _bare_unit(cell: str) -> str | None:
    text = cell.strip()
    if text.startswith(("[", "(")) and text.endswith(("]", ")")) and not units.is_known(text):
        text = text[1:-1].strip()
    return text or None


def _parted(cell: str) -> Column:
    """Name and unit of a header such as "pos [mm]"; round brackets and slashes count only around a known unit."""
    match = _BRACKETS.fullmatch(cell)
    if match is None or not match[1]:
        return Column(cell, None, cell)
    square, other = match[2], match[3] or match[4]
    if square is not None:
        return Column(match[1], square.strip() or None, cell)
    if other and _looks_like_unit(other.strip()):
        return Column(match[1], other.strip(), cell)
    return Column(cell, None, cell)
