"""Closed-loop roots right of a given abscissa, with exact dead time and hold: every one, each certified.

Without delay they are the roots of D + K N. With delay, boxes that cover the region are dropped where |K G_L| = 1 or
the angle of 180 deg is impossible, solved where Newton's method is certain to have exactly one root, otherwise split.
"""

import math
from functools import partial
from itertools import takewhile

import numpy as np

from .condition import LocusError
from .enclosure import unpaired
from .loop import ComplexArray, FloatArray, OpenLoop, hold_factor

_LEVELS = 60
_MOST_BOXES = 400_000
_SMALLEST = 1e-9  # half diagonal of a box, as a share of its distance, at which what is left is a multiple root
_MANY = 2e5  # height of the region times the longest delay: about two pi for each pair of roots
_TURN = 2.0 * np.pi


def closed_loop_roots(loop: OpenLoop, loop_gain: float, right_of: float | None = None) -> ComplexArray:
    """Every closed-loop root at this K with real part above `right_of`, multiple ones repeated.

    Parameters
    ----------
    loop : OpenLoop
    loop_gain : float
        Positive.
    right_of : float or None, 1/s
        None: all of them without delay, and right of `default_left` with it; farther to the right where some 100,000
        lie right of that.

    Returns
    -------
    (k,) complex array, 1/s
        By falling real part, conjugates next to each other (positive imaginary part first).

    Raises
    ------
    LocusError
        The gain is not positive, or the region holds more roots than can be separated.

    Examples
    --------
    >>> closed_loop_roots(OpenLoop((1.0,), (1.0, 3.0, 2.0, 0.0)), 6.0).real.round(9).tolist()
    [0.0, 0.0, -3.0]
    """
    if not (loop_gain > 0.0 and math.isfinite(loop_gain)):
        raise LocusError("the loop gain must be positive", where="roots", found=str(loop_gain), expected="K > 0")
    if loop.rational:
        roots = _polynomial_roots(loop, loop_gain)
        return _ordered(roots if right_of is None else roots[roots.real > right_of])
    left = _usual_left(loop, loop_gain) if right_of is None else right_of
    zeros, poles, cancelled = unpaired(loop.zeros, loop.poles)
    upper = _isolated(loop, loop_gain, left, zeros, poles)
    upper = upper[(upper.real > left) & (upper.imag >= 0.0)]
    return _ordered(np.concatenate([upper, np.conj(upper[upper.imag > 0.0]), cancelled[cancelled.real > left]]))


def default_left(loop: OpenLoop) -> float:
    """-3 over the longest delay, or left of every open-loop root where that is farther, at most -30 over the delay."""
    longest = loop.dead_time + (loop.hold or 0.0)
    farthest = max((-float(root.real) for root in (*loop.poles, *loop.zeros)), default=0.0)
    return -min(max(3.0 / longest, 1.2 * farthest), 30.0 / longest)


def _usual_left(loop: OpenLoop, loop_gain: float) -> float:
    """`default_left`, moved to the right while more roots lie right of it than anyone reads."""
    left, longest = default_left(loop), loop.dead_time + (loop.hold or 0.0)
    while farthest_root(loop, loop_gain, left) * longest > _MANY and left < -3.0 / longest:
        left *= 0.8
    return left


def _polynomial_roots(loop: OpenLoop, loop_gain: float) -> ComplexArray:
    """Roots of D + K N, each polished by Newton's method where that brings it nearer."""
    closed = np.polyadd(loop.denominator, loop_gain * np.asarray(loop.numerator))
    roots = np.asarray(np.roots(closed), dtype=np.complex128)
    slope = np.polyder(closed)
    for _ in range(2):
        with np.errstate(divide="ignore", invalid="ignore"):
            trial = roots - np.polyval(closed, roots) / np.polyval(slope, roots)
        better = np.abs(np.polyval(closed, trial)) < np.abs(np.polyval(closed, roots))
        roots = np.where(better, trial, roots)
    return roots


def _ordered(roots: ComplexArray) -> ComplexArray:
    return roots[np.lexsort((-roots.imag, np.abs(roots.imag), -roots.real.round(12)))]


def _isolated(loop: OpenLoop, loop_gain: float, left: float, zeros: ComplexArray, poles: ComplexArray) -> ComplexArray:
    """Roots with imaginary part >= 0 right of `left`, and some beyond the edges."""
    centre, half = _cover(loop, loop_gain, left)
    found: list[ComplexArray] = []
    clustered: list[ComplexArray] = []
    for level in range(_LEVELS):
        possible, certain = _judge(loop, loop_gain, centre, half, zeros, poles)
        found.append(_newton(loop, loop_gain, centre[certain]))
        split = possible & ~certain
        small = split & (np.abs(half) < _SMALLEST * np.abs(centre))
        clustered.append(centre[small])
        split &= ~small
        if not split.any():
            multiple = _multiple(loop, loop_gain, np.concatenate(clustered))
            return np.concatenate([_distinct(np.concatenate(found)), multiple])
        centre, half = _quartered(centre[split], half[split])
        if centre.size > _MOST_BOXES or level == _LEVELS - 1:
            break
    raise LocusError(
        "the closed-loop roots could not be separated",
        where=f"roots at K = {loop_gain:g}, right of {left:g} 1/s",
        found=f"{centre.size} boxes left",
        advice="ask for a region farther to the right",
    )


def _cover(loop: OpenLoop, loop_gain: float, left: float) -> tuple[ComplexArray, ComplexArray]:
    """Boxes (centre, half width + j half height) over the part of the upper half-plane that can hold roots."""
    radius = farthest_root(loop, loop_gain, left)
    width = radius - left
    longest = loop.dead_time + (loop.hold or 0.0)
    side = min(width, 2.0 / longest)
    columns, rows = math.ceil(width / side), math.ceil(radius / side)
    while columns * rows > 20_000:
        side *= 2.0
        columns, rows = math.ceil(width / side), math.ceil(radius / side)
    x = left + side * (np.arange(columns) + 0.5)
    y = side * (np.arange(rows) + 0.5)
    centre = (x[:, None] + 1j * y[None, :]).ravel()
    reach = np.hypot(np.maximum(np.abs(centre.real) - side / 2, 0.0), centre.imag - side / 2)
    centre = centre[reach <= radius]
    return centre, np.full(centre.shape, 0.5 * side * (1.0 + 1.0j))


def farthest_root(loop: OpenLoop, loop_gain: float, left: float) -> float:
    """A radius (1/s) beyond which |K G_L| < 1 right of `left`, for a loop with delay.

    Raises
    ------
    LocusError
        There is none: infinitely many roots lie in the region.
    """
    zeros, poles, _ = unpaired(loop.zeros, loop.poles)
    largest = float(np.max(np.abs(np.concatenate([zeros, poles, [1e-12]]))))
    longest = loop.dead_time + (loop.hold or 0.0)
    radius = 2.0 * largest + 1.0 / longest
    stretch = math.exp(max(-left, 0.0) * loop.dead_time)
    held = 1.0 if loop.hold is None else 1.0 + math.exp(max(-left, 0.0) * loop.hold)
    for _ in range(200):
        size = loop_gain * abs(loop.leading) * stretch
        size *= float(np.prod(radius + np.abs(zeros)) / np.prod(radius - np.abs(poles)))
        size *= 1.0 if loop.hold is None else held / (radius * loop.hold)
        if size < 1.0:
            return radius
        radius *= 1.3
    raise LocusError(
        "infinitely many closed-loop roots lie in the region",
        where=f"roots at K = {loop_gain:g}, right of {left:g} 1/s",
        advice="ask for a region farther to the right, or give the loop more poles than zeros",
    )


def _judge(
    loop: OpenLoop, loop_gain: float, centre: ComplexArray, half: ComplexArray, zeros: ComplexArray, poles: ComplexArray
) -> tuple[np.ndarray, np.ndarray]:
    """Which boxes may hold a root, and in which Newton's method has exactly one root within twice their radius.

    Within a radius r of the centre ln G_L changes by at most r (|G_L'/G_L| + r b), b a bound of the slope's change per
    distance; a root needs ln(-K G_L) = 0 there. Where a pole or zero is nearer, bounds of |K G_L| decide.
    """
    radius = np.abs(half)
    distance = np.abs(centre[:, None] - np.concatenate([zeros, poles]))
    least, most = _sizes(loop, loop_gain, centre, radius, distance, zeros.size)
    once, twice = _bends(distance, radius), _bends(distance, 2.0 * radius)
    if loop.hold is not None:
        lowest, highest, bent_once, bent_twice = _held(loop.hold, centre, radius)
        least, most, once, twice = least + lowest, most + highest, once + bent_once, twice + bent_twice
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        misfit = np.log(-loop_gain * loop.at(centre))
        slope = loop.log_derivative(centre)
        size, reach = np.abs(misfit), 2.0 * radius
        impossible = (least > 0.0) | (most < 0.0) | (size > radius * (np.abs(slope) + radius * once))
        single = reach * (np.abs(slope) + twice * reach) < np.pi  # the angle reaches 180 deg at most once, not mod 360
        certain = ~impossible & single & (size + reach * (twice * reach) <= reach * np.abs(slope))
    return ~impossible, certain


def _sizes(
    loop: OpenLoop, loop_gain: float, centre: ComplexArray, radius: FloatArray, distance: FloatArray, zeros: int
) -> tuple[FloatArray, FloatArray]:
    """Least and largest ln|K G_L| without the hold on discs."""
    near, far = np.maximum(distance - radius[:, None], 0.0), distance + radius[:, None]
    level = np.log(loop_gain * np.abs(loop.leading)) - loop.dead_time * centre.real
    with np.errstate(divide="ignore"):
        near, far = np.log(near), np.log(far)
    least = near[:, :zeros].sum(axis=1) - far[:, zeros:].sum(axis=1)
    most = far[:, :zeros].sum(axis=1) - near[:, zeros:].sum(axis=1)
    return level + least - loop.dead_time * radius, level + most + loop.dead_time * radius


def _bends(distance: FloatArray, radius: FloatArray) -> FloatArray:
    """Sum of 1/(d (d - r)), s^2: how the slopes 1/(s - root) change per distance; infinite with a root inside."""
    room = distance - radius[:, None]
    inverse = 1.0 / (distance * np.where(room > 0.0, room, 1.0))
    return np.asarray(np.where(room > 0.0, inverse, np.inf).sum(axis=1), dtype=np.float64)


def _held(
    hold: float, centre: ComplexArray, radius: FloatArray
) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
    """Least and largest ln|hold| on discs, and the bends of its slope, s^2, within once and twice the radius."""
    x, r = centre * hold, radius * hold
    nearest = np.rint(x.imag / _TURN)
    once, twice = np.full(x.shape, 0.04), np.full(x.shape, 0.04)  # zeros farther than two from the nearest: < 0.033
    for step in range(-2, 3):
        index = nearest + step
        distance = np.where(index == 0.0, np.inf, np.abs(x - 1j * _TURN * index))
        once, twice = (
            once + 1.0 / np.maximum(distance - r, 1e-150) ** 2,
            twice + 1.0 / np.maximum(distance - 2.0 * r, 1e-150) ** 2,
        )
    size = np.abs(hold_factor(x))
    # |h'| <= max(1, exp(-Re x))/2 on the disc, as h(x) = integral of exp(-x u) over u in (0, 1)
    with np.errstate(divide="ignore", over="ignore", invalid="ignore"):  # far to the left a large box has no bound
        change = 0.5 * np.maximum(1.0, np.exp(-(x.real - r))) * r
        lowest, highest = np.log(np.fmax(size - change, 0.0)), np.log(size + change)
    return (
        lowest,
        highest,
        np.where(r < np.pi, hold * hold * once, np.inf),
        np.where(2.0 * r < np.pi, hold * hold * twice, np.inf),
    )


def _quartered(centre: ComplexArray, half: ComplexArray) -> tuple[ComplexArray, ComplexArray]:
    quarter = 0.5 * half
    corners = [quarter.real * a + 1j * quarter.imag * b for a in (-1, 1) for b in (-1, 1)]
    return np.concatenate([centre + c for c in corners]), np.tile(quarter, 4)


def _newton(loop: OpenLoop, loop_gain: float, s: ComplexArray) -> ComplexArray:
    """Roots from certified starts, polished; those within rounding of the real axis put on it."""
    if s.size == 0:
        return s
    for _ in range(30):
        step = np.log(-loop_gain * loop.at(s)) / loop.log_derivative(s)
        s = s - step
        if np.all(np.abs(step) <= 4e-16 * np.abs(s)):
            break
    return np.where(np.abs(s.imag) <= 1e-13 * np.abs(s), s.real + 0j, s)


def _multiple(loop: OpenLoop, loop_gain: float, centre: ComplexArray) -> ComplexArray:
    """What is left between the smallest boxes: clusters, each counted by the argument principle around it.

    A multiple root, or a root that a tiny K exp(-s L) leaves within rounding of an open-loop pole.
    """
    clusters: list[complex] = []
    for point in centre:
        if not any(abs(point - c) <= 1e-6 * abs(point) for c in clusters):
            clusters.append(complex(point))
    found: list[complex] = []
    for cluster in clusters:
        circle = cluster + 1e-5 * abs(cluster) * np.exp(2j * np.pi * np.arange(65) / 64)
        turns = np.diff(np.unwrap(np.angle(1.0 + loop_gain * loop.at(circle)))).sum() / _TURN
        middle = cluster.real + 0j if abs(cluster.imag) < 1e-6 * abs(cluster) else cluster
        inside = loop.poles[np.abs(loop.poles - cluster) < 1e-5 * abs(cluster)]
        if inside.size:
            middle = complex(inside[np.argmin(np.abs(inside - middle))])
        count = round(float(turns)) + inside.size
        found += [_beside_pole(loop, loop_gain, middle)] if count == inside.size == 1 else [middle] * count
    return np.array(found, complex)


def _beside_pole(loop: OpenLoop, loop_gain: float, pole: complex) -> complex:
    """The root that a tiny K G_L leaves beside a simple pole: Newton's method on D + K N exp(-s L), its slope D'."""
    s, slope = pole, complex(np.polyval(np.polyder(np.asarray(loop.denominator)), pole))
    for _ in range(3):
        rest = loop_gain * np.polyval(loop.numerator, s) * np.exp(-s * loop.dead_time)
        rest *= 1.0 if loop.hold is None else complex(hold_factor(np.asarray(s * loop.hold)))
        step = complex(np.polyval(loop.denominator, s) + rest) / slope
        if not abs(step) < 1e-5 * abs(s):
            return pole
        s -= step
    return s.real + 0j if pole.imag == 0.0 else s


def _distinct(roots: ComplexArray) -> ComplexArray:
    """Each certified root once: neighbouring boxes find the same one to rounding.

    By rising imaginary part only the last ones kept can be the same; a region may hold tens of thousands.
    """
    kept: list[complex] = []
    for root in roots[np.argsort(roots.imag)].tolist():
        near = 1e-11 * abs(root)
        if not any(abs(root - other) <= near for other in takewhile(partial(_beside, root, near), reversed(kept))):
            kept.append(root)
    return np.array(kept, complex)


def _beside(root: complex, near: float, other: complex) -> bool:
    return root.imag - other.imag <= near
