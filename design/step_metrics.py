"""Measures of a response to a step, on many columns at once: peak, settling, rise and recovery."""

from typing import Any

import numpy as np
from numpy.typing import NDArray

from ..ident.run import FloatArray
from .sampled.bank import IndexArray

_BLOCK = 32  # rows
_AROUND, _SHARP = 3, 3.0  # rows on each side of a corner; its break of slope over the bends beside it


def first_highest(table: NDArray[Any]) -> IndexArray:
    """(c,) row at which each column of (q, c) `table` is highest for the first time: `argmax` along the rows.

    In blocks, because numpy looks along the rows of a large table several times more slowly than across.
    """
    rows, columns = table.shape
    if rows < 4 * _BLOCK:
        return np.asarray(table.argmax(axis=0))
    whole = rows - rows % _BLOCK
    tops = table[:whole].reshape(whole // _BLOCK, _BLOCK, columns).max(axis=1)
    if whole < rows:
        tops = np.concatenate([tops, table[whole:].max(axis=0)[None]])
    begin = tops.argmax(axis=0) * _BLOCK
    places = np.minimum(begin + np.arange(_BLOCK)[:, None], rows - 1)
    inside = table[places, np.arange(columns)].argmax(axis=0)
    return np.asarray(begin + inside)


def overshoot(response: FloatArray, final: FloatArray) -> FloatArray:
    """(peak - final)/|final - start| in the direction of the step; never below zero.

    Parameters
    ----------
    response : (q, c) array, response unit
        Even steps in time, start at zero before the first row.
    final : (c,) array, response unit
        Steady change of the response.

    Returns
    -------
    (c,) array
        A fraction; the peak is refined by a parabola through its neighbours.
    """
    return np.maximum(peak(response / final) - 1.0, 0.0)


def peak(response: FloatArray) -> FloatArray:
    """(c,) largest value of (q, c) `response`, refined by a parabola, or where two curves meet in a corner.

    Zero at the start counts. A corner is where a delayed jump of the command arrives at a plant of relative degree one.
    """
    columns = np.arange(response.shape[1])
    top = first_highest(response)
    middle = np.clip(top, 1, max(response.shape[0] - 2, 1))
    left, here, right = (response[middle + i, columns] for i in (-1, 0, 1))
    bend = left - 2.0 * here + right
    inside = (middle == top) & (bend < 0.0)
    with np.errstate(over="ignore", invalid="ignore"):  # a loop at the edge of stability may have left for good
        lift = np.where(inside, -((right - left) ** 2) / (8.0 * np.where(inside, bend, -1.0)), 0.0)
        highest = np.maximum(response[top, columns] + lift, 0.0)
        if response.shape[0] < 2 * _AROUND:
            return np.asarray(highest)
        for first in (0, -1):
            corner, height = _corner(response, top + first, columns)
            highest = np.where(corner, np.maximum(height, np.maximum(response[top, columns], 0.0)), highest)
    return np.asarray(highest)


def _corner(response: FloatArray, before: IndexArray, columns: IndexArray) -> tuple[NDArray[np.bool_], FloatArray]:
    """Whether the curves left and right of the gap after row `before` meet in a corner within it, and how high.

    Each side is continued as a parabola through its three nearest rows. It is a corner where the slope breaks by far
    more than the sides bend.
    """
    place = np.clip(before, _AROUND - 1, response.shape[0] - _AROUND - 1)
    a, b, c, d, e, f = (response[place + i, columns] for i in (-2, -1, 0, 1, 2, 3))
    left, right = c - b, e - d
    bends = c - 2.0 * b + a, f - 2.0 * e + d
    at = np.full(place.size, 0.5)
    for _ in range(3):
        low = c + at * left + 0.5 * at * (at + 1.0) * bends[0]
        high = d + (at - 1.0) * right + 0.5 * (at - 1.0) * (at - 2.0) * bends[1]
        slopes = left + (at + 0.5) * bends[0], right + (at - 1.5) * bends[1]
        fall = slopes[0] - slopes[1]
        at = np.clip(at + (high - low) / np.where(fall > 0.0, fall, 1.0), -0.05, 1.05)
    sharp = fall > _SHARP * (np.abs(bends[0]) + np.abs(bends[1]))
    inside = (at > -0.02) & (at < 1.02) & (place == before) & (slopes[0] > 0.0) & (slopes[1] < 0.0)
    return inside & sharp & (np.abs(high - low) < 1e-6 * np.abs(c)), low


def settling_time(response: FloatArray, final: FloatArray, band: float, spacing: float) -> FloatArray:
    """Last entry into +-band of |final - start| about final, s; inf where the last row is outside.

    Parameters
    ----------
    response : (q, c) array
        Row i stands at time (i + 1) `spacing`; the start, zero, at time 0.
    final : (c,) array
    band : float
        A fraction of the step.
    spacing : float, s
    """
    return last_entry(np.abs(response / final - 1.0), band, spacing, start=1.0)


def last_entry(distance: FloatArray, band: float, spacing: float, start: float = 0.0) -> FloatArray:
    """Time of the last crossing into `band`, s, interpolated; 0 if never outside, inf if outside at the end.

    Parameters
    ----------
    distance : (q, c) array
        Row i stands at (i + 1) `spacing`.
    start : float
        Distance at time 0.
    """
    outside = ~(distance[::-1] <= band)
    rows, columns = distance.shape[0], np.arange(distance.shape[1])
    back = first_highest(outside)
    ever = outside[back, columns]
    index = np.where(ever, rows - 1 - back, -1)
    after = distance[np.minimum(index + 1, rows - 1), columns]
    before = np.where(index >= 0, distance[np.maximum(index, 0), columns], start)
    gap = before - after
    share = np.where(gap > 0.0, (before - band) / np.where(gap > 0.0, gap, 1.0), 1.0)
    time = spacing * (index + 1 + np.clip(share, 0.0, 1.0))
    time = np.where(ever | (start > band), time, 0.0)
    return np.where(outside[0], np.inf, time)


def largest_from(distance: FloatArray, time: float, spacing: float) -> FloatArray:
    """(c,) largest distance from `time` (s) on; between rows it is straight, a turning point refined by a parabola.

    Parameters
    ----------
    distance : (q, c) array
        Row i stands at (i + 1) `spacing`, 0 at time 0.
    """
    place = min(max(time / spacing - 1.0, 0.0), distance.shape[0] - 1.0)
    first = int(np.ceil(place))
    share = first - place
    at_time = distance[first] if first == 0 else share * distance[first - 1] + (1.0 - share) * distance[first]
    rest = distance[first:]
    return np.asarray(np.maximum(at_time, peak(rest) if rest.shape[0] > 2 else rest.max(axis=0, initial=0.0)))


def short_of_rise(share: FloatArray, limit: float, spacing: float) -> FloatArray:
    """(c,) what the response (as a share of the step) lacks to 90 % `limit` s after it first reached 10 %."""
    begun = first_reach(share, 0.1, spacing)
    rows, columns = share.shape[0], np.arange(share.shape[1])
    until = np.where(np.isfinite(begun), begun, 0.0) + limit
    place = np.clip(until / spacing - 1.0, 0.0, rows - 1.0)
    below = np.floor(place).astype(int)
    above = np.minimum(below + 1, rows - 1)
    here = share[below, columns] + (place - below) * (share[above, columns] - share[below, columns])
    highest = np.maximum(np.maximum.accumulate(share, axis=0)[below, columns], here)
    return np.where(np.isfinite(begun), 0.9 - highest, 1.0)


def rise_time(response: FloatArray, final: FloatArray, spacing: float) -> FloatArray:
    """From the first 10 % to the first 90 % of the step, s; inf where 90 % is never reached."""
    return rise_of_share(response / final, spacing)


def rise_of_share(share: FloatArray, spacing: float) -> FloatArray:
    """The same for a response as a share of the step."""
    late = first_reach(share, 0.9, spacing)
    early = np.where(np.isfinite(late), first_reach(share, 0.1, spacing), 0.0)
    return late - early


def first_reach(share: FloatArray, level: float, spacing: float) -> FloatArray:
    """Time at which each column first reaches `level`, s, interpolated; inf where it does not."""
    reached = share >= level
    columns = np.arange(share.shape[1])
    index = first_highest(reached)
    after = share[index, columns]
    before = np.where(index > 0, share[np.maximum(index - 1, 0), columns], 0.0)
    part = (level - before) / np.where(after > before, after - before, 1.0)
    return np.where(reached[index, columns], spacing * (index + np.clip(part, 0.0, 1.0)), np.inf)


def late(response: FloatArray, share: float) -> FloatArray:
    """The last share of the (q, c) record, one row at least."""
    return response[-max(int(response.shape[0] * share), 1) :]


def wanders(response: FloatArray, final: FloatArray) -> NDArray[np.bool_]:
    """(c,) whether the last tenth of the record still moves by more than half a per cent of the step."""
    tail = response[-max(response.shape[0] // 10, 2) :]
    return np.asarray(np.ptp(tail, axis=0) > 0.005 * np.abs(final))


def still_moving(limited: NDArray[np.bool_] | None, count: int) -> NDArray[np.bool_]:
    """(c,) whether the clamp still acts in the last tenth of the record: such a column has not settled."""
    if limited is None:
        return np.zeros(count, dtype=bool)
    tail = max(limited.shape[0] // 10, 1)
    return np.asarray(limited[-tail:].all(axis=0))
