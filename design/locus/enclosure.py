"""Every point of a path where the angle condition holds, by enclosing angle and angle slope on intervals.

Each factor turns monotonically along the path, so its angle on an interval lies between those at the ends and its slope
between those nearest to and farthest from it. Intervals that can't hold an angle of 180 deg (mod 360 deg) are dropped,
those on which the slope has one sign are solved, the others are split.
"""

from dataclasses import dataclass

import numpy as np

from .condition import LocusError
from .loop import ComplexArray, FloatArray, OpenLoop, hold_factor, hold_log_derivative
from .paths import Path

_SAME = 1e-11  # relative distance at which two factors are one, or a factor stands on the path
_LEVELS = 200
_MOST_BOXES = 200_000
_TINY_BOX = 1e-13
_AT_START = 1e-12  # a crossing this near to t = 0, as a share of its interval, is the start itself
_TURN = 2.0 * np.pi


@dataclass(frozen=True)
class _Turning:
    """What turns the angle along a path.

    at: complex t of the factors off the path; sign: +1 zero, -1 pole; breaks: real t of those on it (and of the hold's
    zeros); delay: s, of dead time and, on the imaginary axis, half of the hold; hold: s, where it must be enclosed.
    """

    at: ComplexArray
    sign: FloatArray
    breaks: FloatArray
    delay: float
    hold: float


@dataclass(frozen=True)
class _Boxes:
    """Intervals [low, high] of t with the angle of -G_L at the middle, lifted angles at both ends and bounds, rad."""

    low: FloatArray
    middle: FloatArray
    high: FloatArray
    at_middle: FloatArray
    at_low: FloatArray
    at_high: FloatArray
    least: FloatArray
    most: FloatArray
    slope_least: FloatArray
    slope_most: FloatArray


def on_locus(loop: OpenLoop, path: Path, end: float) -> FloatArray:
    """(k,) parameters t in (0, end] at which the path crosses the locus of K > 0, rising; touching points are left out.

    Raises
    ------
    LocusError
        More intervals arose than can be held; the path is too long for this loop.
    """
    turning = _turning(loop, path, end)
    if turning.at.size == 0 and turning.delay == 0.0 and turning.hold == 0.0:
        return np.empty(0)  # the angle is constant between breaks: the path lies on the locus or meets it nowhere
    edges = np.unique(np.concatenate([[0.0], turning.breaks, _landmarks(turning, end), [end]]))
    low, high = edges[:-1], edges[1:]
    found: list[FloatArray] = []
    for _ in range(_LEVELS):
        boxes = _enclose(loop, path, turning, low, high)
        holds = np.floor(boxes.most / _TURN) >= np.ceil(boxes.least / _TURN)
        sure = boxes.slope_least * boxes.slope_most > 0.0
        found.append(_solve(loop, path, turning, boxes, np.flatnonzero(holds & sure)))
        split = holds & ~sure & (high - low > _TINY_BOX * high) & (high > 1e-14 * end)
        if not split.any():
            break
        low, high = _split(low[split], high[split])
        if low.size > _MOST_BOXES:
            raise LocusError("too many intervals", where="crossings", found=str(low.size), expected=str(_MOST_BOXES))
    return _distinct(np.concatenate(found), turning.breaks)


def unpaired(zeros: ComplexArray, poles: ComplexArray) -> tuple[ComplexArray, ComplexArray, ComplexArray]:
    """Zeros and poles without those that cancel, and the cancelled poles: closed-loop poles at every gain."""
    if zeros.size == 0:
        return zeros, poles, zeros
    rest = list(poles)
    kept, cancelled = [], []
    for zero in zeros:
        near = min(range(len(rest)), key=lambda i: abs(rest[i] - zero), default=None)
        if near is not None and abs(rest[near] - zero) <= _SAME * abs(zero):
            cancelled.append(rest.pop(near))
        else:
            kept.append(zero)
    return np.array(kept, complex), np.array(rest, complex), np.array(cancelled, complex)


def _turning(loop: OpenLoop, path: Path, end: float) -> _Turning:
    zeros, poles, _ = unpaired(loop.zeros, loop.poles)
    surplus = path.common(poles.size - zeros.size)
    zeros = _without_mirrors(np.concatenate([path.place(zeros), surplus]))
    poles = _without_mirrors(path.place(poles))
    at = np.concatenate([zeros, poles])
    sign = np.concatenate([np.ones(zeros.size), -np.ones(poles.size)])
    on_path = np.abs(at.imag) <= _SAME * np.abs(at)
    breaks = at.real[on_path]
    delay, hold = loop.dead_time, loop.hold or 0.0
    if path.on_axis and hold > 0.0:
        breaks = np.concatenate([breaks, _TURN / hold * np.arange(1, int(end * hold / _TURN) + 1)])
        delay, hold = loop.delay, 0.0
    breaks = breaks[(breaks > 0.0) & (breaks < end)]
    return _Turning(at[~on_path], sign[~on_path], breaks, delay, hold)


def _without_mirrors(at: ComplexArray) -> ComplexArray:
    """Less the factors whose mirror image about the path turns against them exactly, and the constant ones."""
    kept: list[complex] = []
    for factor in at[np.isfinite(at)]:
        mirror = next((i for i, k in enumerate(kept) if abs(k - factor.conjugate()) <= _SAME * abs(factor)), None)
        if mirror is None or factor.imag == 0.0:
            kept.append(complex(factor))
        else:
            kept.pop(mirror)
    return np.array(kept, complex)


def _landmarks(turning: _Turning, end: float) -> FloatArray:
    """Where to cut first: beside each factor, and often enough for the delay to turn about once in an interval."""
    beside = turning.at.real
    beside = beside[(beside > 0.0) & (beside < end)]
    return np.concatenate([beside, np.linspace(0.0, end, 9)[1:-1]])


def _split(low: FloatArray, high: FloatArray) -> tuple[FloatArray, FloatArray]:
    wide = high > 4.0 * low
    cut = np.where(wide, np.sqrt(np.maximum(low, 1e-3 * high) * high), 0.5 * (low + high))
    return np.concatenate([low, cut]), np.concatenate([cut, high])


def _enclose(loop: OpenLoop, path: Path, turning: _Turning, low: FloatArray, high: FloatArray) -> _Boxes:
    middle = 0.5 * (low + high)
    at_middle = np.angle(-loop.at(path.at(middle)))
    before = -_turned(turning, middle, low)
    after = _turned(turning, middle, high)
    at_low, at_high = at_middle - before.sum(axis=1), at_middle + after.sum(axis=1)
    whole = before + after
    least = at_low + np.minimum(whole, 0.0).sum(axis=1)
    most = at_low + np.maximum(whole, 0.0).sum(axis=1)
    slope_least, slope_most = _slopes(turning, low, high)
    delayed = -turning.delay * (path.at(np.stack([low, high])) - path.at(middle)).imag
    rise_least, rise_most = path.height_rate(low, high)
    slopes = np.stack([-turning.delay * rise_least, -turning.delay * rise_most])
    change = delayed[1] - delayed[0]
    at_low, at_high = at_low + delayed[0], at_high + delayed[1]
    least, most = least + delayed[0] + np.minimum(change, 0.0), most + delayed[0] + np.maximum(change, 0.0)
    slope_least, slope_most = slope_least + slopes.min(axis=0), slope_most + slopes.max(axis=0)
    if turning.hold > 0.0:
        ends, spread, held_least, held_most = _held(path, turning.hold, low, middle, high)
        at_low, at_high = at_low + ends[0], at_high + ends[1]
        least, most = least + ends[0] - spread, most + ends[0] + spread
        slope_least, slope_most = slope_least + held_least, slope_most + held_most
    pad = 1e-12 * (1.0 + np.abs(at_low))
    return _Boxes(low, middle, high, at_middle, at_low, at_high, least - pad, most + pad, slope_least, slope_most)


def _turned(turning: _Turning, start: FloatArray, stop: FloatArray) -> FloatArray:
    """(n, factors) signed angles, rad, by which the factors turn from start to stop."""
    ratio = (stop[:, None] - turning.at) / (start[:, None] - turning.at)
    return np.asarray(turning.sign * np.angle(ratio), dtype=np.float64)


def _slopes(turning: _Turning, low: FloatArray, high: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Sums of the least and the largest b/((t - a)^2 + b^2) of factors at a + j b, signed."""
    a, b = turning.at.real, turning.at.imag
    near = np.maximum(np.maximum(low[:, None] - a, a - high[:, None]), 0.0)
    far = np.maximum(np.abs(low[:, None] - a), np.abs(high[:, None] - a))
    steep, flat = turning.sign * b / (near**2 + b**2), turning.sign * b / (far**2 + b**2)
    return np.minimum(steep, flat).sum(axis=1), np.maximum(steep, flat).sum(axis=1)


def _held(
    path: Path, hold: float, low: FloatArray, middle: FloatArray, high: FloatArray
) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
    """The hold's angle at both ends relative to the middle, its spread, and its least and largest slope.

    The log derivative differs from that at the middle by at most the radius times sum 1/distance^2 to the hold's zeros.
    """
    half = 0.5 * (high - low)
    x = path.at(middle) * hold
    radius = half * path.rate_bound * hold
    nearest = np.rint(x.imag / _TURN)
    wobble = np.full(x.shape, 0.04)  # 2 sum_{j >= 3} (2 pi (j - 1))^-2 < 0.033: zeros farther than two from the nearest
    for step in range(-2, 3):
        index = nearest + step
        distance = np.abs(x - 1j * _TURN * index) - radius
        room = np.where(index == 0.0, np.inf, np.maximum(distance, 1e-150))
        with np.errstate(over="ignore"):
            wobble = wobble + 1.0 / room**2
    slope = hold_log_derivative(x)
    loose = (np.abs(slope) + wobble * radius) * radius
    safe = (loose < 0.5 * np.pi) & (radius < np.pi)
    centre = hold * (slope * path.rate(middle)).imag
    with np.errstate(over="ignore", invalid="ignore"):
        margin = hold * (wobble * radius * path.rate_bound + np.abs(slope) * path.bend * half)
    margin = np.where(safe, margin, np.inf)
    factor = hold_factor(x)
    ends = np.angle(hold_factor(path.at(np.stack([low, high])) * hold) / factor)
    return ends, np.where(safe, 2.0 * loose, np.inf), centre - margin, centre + margin


def _lift(loop: OpenLoop, path: Path, turning: _Turning, boxes: _Boxes, box: np.ndarray, t: FloatArray) -> FloatArray:
    """Angle of -G_L at t in the given boxes, continued from their middles, rad."""
    middle = boxes.middle[box]
    angle = boxes.at_middle[box] + _turned(turning, middle, t).sum(axis=1)
    angle = angle - turning.delay * (path.at(t) - path.at(middle)).imag
    if turning.hold > 0.0:
        angle = angle + np.angle(hold_factor(path.at(t) * turning.hold) / hold_factor(path.at(middle) * turning.hold))
    return np.asarray(angle, dtype=np.float64)


def _slope(path: Path, turning: _Turning, t: FloatArray) -> FloatArray:
    """Slope of the angle of -G_L at t, rad per unit of t."""
    slope = _slopes(turning, t, t)[0] - turning.delay * path.height_rate(t, t)[0]
    if turning.hold > 0.0:
        slope = slope + turning.hold * (hold_log_derivative(path.at(t) * turning.hold) * path.rate(t)).imag
    return np.asarray(slope, dtype=np.float64)


def _solve(loop: OpenLoop, path: Path, turning: _Turning, boxes: _Boxes, sure: np.ndarray) -> FloatArray:
    """Every crossing in boxes on which the angle is monotone."""
    first = np.minimum(boxes.at_low[sure], boxes.at_high[sure])
    last = np.maximum(boxes.at_low[sure], boxes.at_high[sure])
    pad = 1e-12 * (1.0 + np.abs(first))
    lowest, highest = np.ceil((first - pad) / _TURN), np.floor((last + pad) / _TURN)
    counts = np.maximum(highest - lowest + 1.0, 0.0).astype(int)
    if counts.sum() == 0:
        return np.empty(0)
    box = np.repeat(sure, counts)
    order = np.arange(counts.sum()) - np.repeat(np.cumsum(counts) - counts, counts)
    goal = _TURN * (np.repeat(lowest, counts) + order)
    rising = boxes.at_high[box] > boxes.at_low[box]
    low, high = boxes.low[box].copy(), boxes.high[box].copy()
    t = 0.5 * (low + high)
    for _ in range(70):
        miss = _lift(loop, path, turning, boxes, box, t) - goal
        above = (miss > 0.0) == rising
        high, low = np.where(above, t, high), np.where(above, low, t)
        slope = _slope(path, turning, t)
        with np.errstate(divide="ignore", invalid="ignore"):
            step = miss / slope
        trial = t - step
        inside = (trial > low) & (trial < high)
        settled = (np.abs(step) <= 4e-16 * t) | (high - low <= 4e-16 * t)
        if settled.all():
            break
        t = np.where(settled, t, np.where(inside, trial, 0.5 * (low + high)))
    return np.asarray(t[t > _AT_START * boxes.high[box]], dtype=np.float64)


def _distinct(t: FloatArray, breaks: FloatArray) -> FloatArray:
    """Sorted, each once, without those that lie on a break or at the start."""
    t = np.sort(t[t > 0.0])
    if t.size == 0:
        return t
    once = t[np.concatenate([[True], np.diff(t) > 1e-12 * t[1:]])]
    near = np.abs(once[:, None] - breaks[None, :]) <= 1e-12 * once[:, None] if breaks.size else np.zeros((1, 1), bool)
    return np.asarray(once[~near.any(axis=1)] if breaks.size else once, dtype=np.float64)
