"""Date and clock texts into seconds from the first one."""

import re
from collections.abc import Sequence

import numpy as np

from ...ident.errors import RecordError
from ...ident.run import FloatArray

DAY = 86400.0
_ISO = re.compile(r"\d{4}-?\d{2}-?\d{2}[T ]?\d{1,2}:")
_CLOCK = re.compile(r"(?:(\S+)[ T])??(\d{1,2}):(\d{2})(?::(\d{2}(?:[.,]\d+)?))?( ?[AP]M)?")


def seconds_of(texts: Sequence[str], where: str, first_line: int) -> FloatArray:
    """(n,) array, s, from the first stamp.

    Parameters
    ----------
    texts : sequence of str
        ISO 8601, or clock times with an optional date that stays the same.
    where : str
        File and column, for messages.
    first_line : int
        Line of the first stamp.

    Raises
    ------
    RecordError
        For a stamp that can't be read, or dates in an order that can't be known.

    Examples
    --------
    >>> seconds_of(["23:59:59.5", "00:00:00.5"], "a log", 1)
    array([0., 1.])
    """
    if len(texts) == 0:
        return np.empty(0)
    if _ISO.match(texts[0].strip()):
        return _iso(texts, where, first_line)
    dates: list[str] = []
    seconds = np.empty(len(texts))
    for index, text in enumerate(texts):
        match = _CLOCK.fullmatch(text.strip())
        if match is None:
            raise RecordError(
                "this is not a clock time",
                where=f"{where}, about line {first_line + index}",
                found=f'"{text}"',
                expected='such as "12:34:56.789" or "2026-11-03T12:34:56.789"',
            )
        dates.append(match[1] or "")
        seconds[index] = _of_day(match)
    if len(set(dates)) > 1:
        raise RecordError(
            "the dates can be read in two ways",
            where=where,
            found=f'"{texts[0]}" and "{texts[-1]}"',
            expected="ISO 8601, such as 2026-11-03T12:34:56.789",
            advice="let the logger write the year first",
        )
    return np.asarray(_over_midnight(seconds) - seconds[0])


class Stamps:
    """The stamps of one column that comes in parts, each going on from the one before.

    Parameters
    ----------
    where : str
        File and column, for messages.

    Examples
    --------
    >>> stamps = Stamps("a log")
    >>> stamps.seconds(["23:59:58", "23:59:59"]), stamps.seconds(["00:00:01"])
    (array([0., 1.]), array([3.]))
    """

    def __init__(self, where: str) -> None:
        self._where = where
        self._last: tuple[str, float] | None = None

    def seconds(self, texts: Sequence[str], first_line: int = 1) -> FloatArray:
        """(n,) array, s, from the first stamp of all.

        Raises
        ------
        RecordError
            As `seconds_of`.
        """
        if self._last is None:
            seconds = seconds_of(texts, self._where, first_line)
        else:
            text, before = self._last
            seconds = before + seconds_of([text, *texts], self._where, first_line - 1)[1:]
        self._last = texts[-1], float(seconds[-1])
        return seconds


def _of_day(match: re.Match[str]) -> float:
    hours = int(match[2])
    if match[5]:
        hours = hours % 12 + 12 * (match[5].strip() == "PM")
    return 3600.0 * hours + 60.0 * int(match[3]) + float((match[4] or "0").replace(",", "."))


def _over_midnight(seconds: FloatArray) -> FloatArray:
    """Clock times that pass midnight go on counting."""
    return seconds + DAY * np.concatenate([[0.0], np.cumsum(np.diff(seconds) < -DAY / 2)])


def _iso(texts: Sequence[str], where: str, first_line: int) -> FloatArray:
    import pandas as pd

    plain = [re.sub(r"(\d),(\d)", r"\1.\2", text.strip()) for text in texts]
    try:
        stamps = pd.to_datetime(pd.Series(plain), format="ISO8601", utc=True).to_numpy(dtype="datetime64[ns]")
    except ValueError as problem:
        raise RecordError(
            "a stamp can't be read",
            where=where,
            found=str(problem).split(". ")[0],
            expected="ISO 8601, such as 2026-11-03T12:34:56.789",
        ) from problem
    lost = np.flatnonzero(np.isnat(stamps))
    if len(lost):
        raise RecordError(
            "a stamp is missing",
            where=f"{where}, about line {first_line + int(lost[0])}",
            found=f'"{texts[int(lost[0])]}", {len(lost)} of {len(texts)}',
            expected="ISO 8601, such as 2026-11-03T12:34:56.789",
            advice="cut such lines out of a copy, or let the logger stamp every row",
        )
    return np.asarray((stamps - stamps[0]).astype("int64") / 1e9, dtype=np.float64)
