"""Cells of a text log into numbers and seconds."""

import io
from pathlib import Path

import numpy as np

from ...ident.errors import RecordError
from ...ident.run import FloatArray
from .cells import WORDS, has_thousands, is_number, is_stamp, is_word
from .csv_dialect import split
from .csv_rows import Rows
from .port import Channel, Hints
from .stamps import Stamps


def parse(file: Path, rows: Rows, wanted: list[int], hints: Hints, clocks: dict[int, Stamps]) -> dict[int, Channel]:
    """The wanted columns of some rows, by their index.

    Parameters
    ----------
    file : Path
    rows : Rows
    wanted : list of int
    hints : Hints
    clocks : dict of int to Stamps
        The columns of dates and clock times so far; filled here, so that a later part goes on from this one.

    Raises
    ------
    RecordError
        For a cell that is neither a number nor a word for none, or a stamp that can't be read.
    """
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
        clock = clocks.setdefault(index, Stamps(f'{file}, column "{columns[index].name}"'))
        seconds = clock.seconds(texts, rows.numbers[0])
        channels[index] = Channel(columns[index].name, seconds, "s", stamps=True)
    return channels


def _fast(rows: Rows, wanted: list[int], hints: Hints) -> dict[int, FloatArray] | None:
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


def _slow(file: Path, rows: Rows, index: int, hints: Hints) -> FloatArray:
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


def _unreadable(file: Path, rows: Rows, index: int, row: int, cell: str) -> RecordError:
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
