"""The record's clock: stamps that are rounded, doubled, run backwards, wrap or jump."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ..run import FloatArray
from .seen import BoolArray, Seen

IndexArray = NDArray[np.intp]
MOST_DISORDER = 0.01  # share of the samples that may be out of order or doubled
HARMLESS = 5e-3  # of the interval: an unevenness that no fit can see
DOUBLE_EPOCH = 4e-7  # s, rounding of stamps of this century in float64
SLIPS = 0.02  # share of the steps
GAP_STEPS = 1.5
LONGEST_GAP = 0.25  # of the record
JITTER_SAID = 0.05  # of the interval
# (jump back in s, what it is): counters and calendars that begin again
_WRAPS = (
    (2.0**32 * 1e-3, "a 32 bit counter of ms"),
    (2.0**32 * 1e-6, "a 32 bit counter of us"),
    (2.0**16 * 1e-3, "a 16 bit counter of ms"),
    (86400.0, "midnight"),
    (3600.0, "the end of summer time"),
)


@dataclass(frozen=True, eq=False)
class Clock:
    """A mended time base.

    Attributes
    ----------
    keep : (m,) array of int
        Indices of the samples to use, in their order.
    time : (m,) array, s
        From the first kept sample, strictly increasing unless a finding stops the record.
    seen : tuple of Seen
    """

    keep: IndexArray
    time: FloatArray
    seen: tuple[Seen, ...]


def mend_clock(stamps: FloatArray, rows: FloatArray) -> Clock:
    """Bring a record's stamps in order; stamps that are only rounded get the even time base behind them.

    Parameters
    ----------
    stamps : (n,) array, s
        NaN where there is none.
    rows : (n, k) array
        The other signals, to know doubled rows.

    Returns
    -------
    Clock
    """
    seen: list[Seen] = []
    keep: IndexArray = np.flatnonzero(np.isfinite(stamps))
    if len(keep) < len(stamps):
        seen.append(Seen("samples without a time", "in the log", f"{len(stamps) - len(keep)} samples", "left out"))
    if len(keep) < 2:
        return Clock(
            keep,
            stamps[keep],
            (*seen, Seen("clock", "whole record", f"{len(keep)} stamps", "check the source of the time", "stops")),
        )
    keep = _without_zero_tail(keep, stamps, rows, seen)
    time = _unwrap(stamps[keep] - stamps[keep[0]], seen)
    even = _even(time)
    if even is not None:
        return Clock(keep, even, (*seen, *_said_rounding(time, even)))
    keep, time = _in_order(keep, time, seen)
    keep, time = _without_doubles(keep, time, rows, seen)
    return Clock(keep, _even_parts(time), tuple(seen))


def _without_zero_tail(keep: IndexArray, stamps: FloatArray, rows: FloatArray, seen: list[Seen]) -> IndexArray:
    """A file that was laid out in advance and not filled ends in zeros."""
    last = stamps[keep[-1]]  # zero in the file, below zero once the stamps count from the first one
    empty = (stamps[keep] == last) & np.all(rows[keep] == 0.0, axis=1)
    filled = np.flatnonzero(~empty)
    tail = len(keep) - 1 - (filled[-1] if len(filled) else 0)
    if 0 < tail < len(keep) and last <= stamps[keep[0]] <= stamps[keep[len(keep) - 1 - tail]]:
        seen.append(
            Seen(
                "zeros at the end",
                f"after sample {len(keep) - tail}",
                f"{tail} samples",
                "left out: the log was not filled to its end",
            )
        )
        return keep[: len(keep) - tail]
    return keep


def _unwrap(time: FloatArray, seen: list[Seen]) -> FloatArray:
    """Add known wraps back, and shift the stamps to begin at zero."""
    steps = np.diff(time)
    typical = float(np.median(steps))
    for index in np.flatnonzero(steps < -0.5):
        for size, name in _WRAPS:
            if abs(steps[index] + size - typical) <= 0.5 * abs(typical) + 1e-6 * size:
                time = time.copy()
                time[index + 1 :] += size
                seen.append(
                    Seen("clock wraps", f"after {time[index]:.6g} s", f"{size:.6g} s back, {name}", "added back")
                )
                break
    return time


def resolution(time: FloatArray) -> float:
    """Largest decimal step, s, that all stamps are multiples of; 0 where there is none down to 1 ns.

    Examples
    --------
    >>> resolution(np.array([0.0, 0.25, 0.5]))
    0.01
    """
    for power in range(0, 10):
        step = 10.0**-power
        off = time / step
        if np.all(np.abs(off - np.round(off)) < 1e-6 * np.maximum(1.0, np.abs(off) * 1e-6)):
            return step
    return 0.0


def _grain(time: FloatArray) -> float:
    """What the stamps were rounded to, s: a decimal step, fewer digits late in the record, or single precision."""
    single = time.astype(np.float32)
    binary = float(np.spacing(single[-1])) if np.array_equal(single.astype(np.float64), time) else 0.0
    return max(resolution(time), resolution(time[-len(time) // 4 :]), binary, DOUBLE_EPOCH)


def _even(time: FloatArray) -> FloatArray | None:
    """The even time base that these stamps are roundings of, when they are.

    Rounding or cutting to a step r leaves every stamp within r of the even one.
    """
    count = len(time)
    if count < 3 or time[-1] <= 0.0:
        return None
    index = np.arange(count, dtype=np.float64)
    slope, start = _line(index, time)
    off = time - (start + slope * index)
    step = max(_grain(time), HARMLESS * slope)
    if slope <= 0.0 or np.ptp(off) > 1.1 * step or step > 2.5 * slope or _slips(np.diff(time)):
        return None
    if np.ptp(off) <= 1e-9 * max(1.0, float(time[-1])):
        return time if np.all(np.diff(time) > 0.0) else index * slope
    return index * _plain_interval(slope, np.ptp(off) / count)


def _slips(steps: FloatArray) -> bool:
    """Whether a few steps are none or twice the usual one: samples doubled or missing rather than rounded."""
    typical = float(np.median(steps))
    odd = (steps <= 0.1 * typical) | (steps >= 1.9 * typical)
    return bool(odd.any() and np.mean(odd) < SLIPS)


def _line(index: FloatArray, time: FloatArray) -> tuple[float, float]:
    centre = index.mean()
    slope = float((index - centre) @ (time - time.mean()) / ((index - centre) @ (index - centre)))
    return slope, float(time.mean() - slope * centre)


def _plain_interval(slope: float, uncertainty: float) -> float:
    """The shortest decimal number within the uncertainty of the interval: 0.0005 for 0.00050001."""
    for digits in range(1, 12):
        short = float(f"{slope:.{digits}g}")
        if abs(short - slope) <= uncertainty:
            return short
    return slope


def _said_rounding(time: FloatArray, even: FloatArray) -> tuple[Seen, ...]:
    worst = float(np.max(np.abs(time - even)))
    interval = float(even[1] - even[0])
    if worst <= 1e-3 * interval:
        return ()
    size = f"stamps to {resolution(time):.3g} s, interval {interval:.6g} s"
    return (Seen("rounded stamps", "whole record", size, "the even time base behind them is used"),)


def _in_order(keep: IndexArray, time: FloatArray, seen: list[Seen]) -> tuple[IndexArray, FloatArray]:
    """Sort a few samples that came late; a clock that really runs backwards stops the record."""
    back = np.flatnonzero(np.diff(time) < 0.0)
    if len(back) == 0:
        return keep, time
    order = np.argsort(time, kind="stable")
    moved = int(np.count_nonzero(order != np.arange(len(order))))
    if moved <= max(2, 4 * MOST_DISORDER * len(time)) and _regular(time[order]):
        seen.append(
            Seen("samples out of order", f"about {time[back[0]]:.6g} s", f"{moved} samples", "sorted by their stamps")
        )
        return keep[order], time[order] - time[order[0]]
    size = f"{len(back)} times, {-np.diff(time)[back].min():.6g} s at most"
    seen.append(
        Seen(
            "clock runs backwards",
            f"after {time[back[0]]:.6g} s",
            size,
            "use the part before or after it (from, to), or give sample_rate in place of the time's source",
            "stops",
        )
    )
    return keep, time


def _regular(time: FloatArray) -> bool:
    steps = np.diff(time)
    typical = float(np.median(steps))
    return typical > 0.0 and bool(np.mean(np.abs(steps - typical) < 0.5 * typical) > 0.9)


def _without_doubles(
    keep: IndexArray, time: FloatArray, rows: FloatArray, seen: list[Seen]
) -> tuple[IndexArray, FloatArray]:
    """Leave the second of two samples with one stamp out, when that is rare."""
    doubled = np.flatnonzero(np.diff(time) == 0.0) + 1
    if len(doubled) == 0:
        return keep, time
    same = int(np.sum(np.all(rows[keep[doubled]] == rows[keep[doubled - 1]], axis=1)))
    size = f"{len(doubled)} samples, {same} of them equal to the one before"
    where = f"first at {time[doubled[0]]:.6g} s"
    if same < len(doubled) and len(doubled) > max(2, MOST_DISORDER * len(time)):
        seen.append(
            Seen(
                "doubled stamps",
                where,
                size,
                "the clock is too coarse for these samples: log finer stamps, or "
                "give sample_rate in place of the time's source",
                "stops",
            )
        )
        return keep, time
    seen.append(Seen("doubled stamps", where, size, "the first of each is used"))
    rest = np.delete(np.arange(len(time)), doubled)
    return keep[rest], time[rest]


def _even_parts(time: FloatArray) -> FloatArray:
    """Between gaps, rounded stamps get the even time base of the whole record; the gaps stay as they are."""
    steps = np.diff(time)
    if len(steps) < 3 or np.any(steps <= 0.0):
        return time
    interval = float(np.mean(steps[steps < GAP_STEPS * np.median(steps)]))
    count = np.round(steps / interval)
    index = np.concatenate([[0.0], np.cumsum(count)])
    if np.any(count < 1.0):
        return time
    slope, start = _line(index, time)
    off = time - (start + slope * index)
    step = max(_grain(time), HARMLESS * slope)
    if np.ptp(off) > 1.1 * step or step > slope or np.ptp(off) <= 1e-9 * max(1.0, float(time[-1])):
        return time
    return index * slope


def see_gaps(time: FloatArray, command: FloatArray) -> tuple[Seen, ...]:
    """Missing stretches, and jitter of the sampling.

    A gap with the same steady command on both sides does no harm: the command is taken as held. Elsewhere nobody knows
    what the command did, and beyond a few single samples nothing may be released on it.

    Parameters
    ----------
    time : (n,) array, s
        Strictly increasing.
    command : (n,) array
    """
    steps = np.diff(time)
    if len(steps) < 3 or np.any(steps <= 0.0):
        return ()
    typical = float(np.median(steps))
    uneven = float(np.mean(np.abs(steps - typical) > 0.25 * typical))
    gaps = np.flatnonzero(steps > (GAP_STEPS if uneven < 0.1 else 10.0) * typical)
    found: list[Seen] = []
    if len(gaps):
        found.append(_seen_gaps(time, command, gaps, typical))
    rest = np.delete(steps, gaps)
    jitter = float(np.std(rest)) / typical
    if jitter > JITTER_SAID:
        found.append(
            Seen(
                "uneven sampling",
                "whole record",
                f"{100 * jitter:.3g} % rms of {typical:.6g} s",
                "the stamps are used as they are",
            )
        )
    return tuple(found)


def _seen_gaps(time: FloatArray, command: FloatArray, gaps: IndexArray, typical: float) -> Seen:
    steps = np.diff(time)[gaps]
    size = f"{len(gaps)} gaps, {steps.max():.6g} s at most, {steps.sum():.6g} s together, interval {typical:.6g} s"
    where = f"first after {time[gaps[0]]:.6g} s"
    harmless = _command_stands(command, gaps)
    missing = float(np.sum(steps[~harmless] / typical - 1.0))
    short = bool(np.all(steps[~harmless] < 4.5 * typical))
    if steps.max() > LONGEST_GAP * time[-1]:
        return Seen(
            "gap", where, size, "use the part before or after it (from, to): too much of the record is missing", "holds"
        )
    if missing <= 0.5:
        return Seen("gap", where, size, "the command stands still on both sides and is taken as held")
    if short and missing <= 0.01 * len(time):
        return Seen("gap", where, size, "the command is taken as held over these few samples")
    return Seen(
        "gap",
        where,
        size,
        "the command moved at or beside the gap: use the part before or after it (from, to), or repeat the run",
        "holds",
    )


def _command_stands(command: FloatArray, gaps: IndexArray) -> BoolArray:
    """(g,) mask: the command has one value in the two samples on either side of each gap."""
    places = np.clip(gaps[:, None] + np.array([-1, 0, 1, 2]), 0, len(command) - 1)
    return np.asarray(np.ptp(command[places], axis=1) == 0.0)
