"""For which K the closed loop is stable and how many roots are unstable, by counting over the critical gains."""

import math

import numpy as np

from .crossings import AxisCrossing, axis_crossings
from .enclosure import unpaired
from .loop import ComplexArray, OpenLoop, hold_log_derivative

StableInterval = tuple[float, float | None]

_ONE_POLE = 1e-6  # relative distance at which poles on the axis count as one multiple pole
_TIE = 1e-9


def stable_gain_intervals(loop: OpenLoop) -> tuple[StableInterval, ...]:
    """Every interval of K > 0 for which all closed-loop roots lie in the open left half-plane; None is unbounded.

    The ends are critical gains (exact dead time and hold) or zero. With as many zeros as poles and dead time the loop
    is unstable from 1/|G_L(infinity)| on.

    Examples
    --------
    >>> [(low, round(high, 9)) for low, high in stable_gain_intervals(OpenLoop((1.0,), (1.0, 3.0, 2.0, 0.0)))]
    [(0.0, 6.0)]
    >>> stable_gain_intervals(OpenLoop((1.0,), (1.0, 1.0)))
    ((0.0, None),)
    """
    ceiling = 1.0 / abs(loop.leading) if _neutral(loop) else math.inf
    edges = [c for c in axis_crossings(loop) if c.loop_gain < ceiling]
    count, low = unstable_at_small_gain(loop), 0.0
    intervals: list[StableInterval] = []
    for crossing in edges:
        if count == 0 and crossing.loop_gain > low:
            intervals.append((low, crossing.loop_gain))
        count, low = count + crossing.direction * crossing.roots, crossing.loop_gain
    if count == 0:
        intervals.append((low, ceiling if ceiling < math.inf else None))
    return tuple(intervals)


def unstable_roots(loop: OpenLoop, loop_gain: float) -> int:
    """How many closed-loop roots lie in the right half-plane at this K (roots on the axis for every K counted too).

    With as many zeros as poles, dead time and K |G_L(infinity)| > 1 there are infinitely many; the count is then of
    those that the finite list of critical gains shows, and at least one.
    """
    crossed = [c for c in axis_crossings(loop, loop_gain) if c.loop_gain < loop_gain]
    count = unstable_at_small_gain(loop) + sum(c.direction * c.roots for c in crossed)
    return max(count, 1) if _neutral(loop) and loop_gain * abs(loop.leading) >= 1.0 else count


def is_stable(loop: OpenLoop, loop_gain: float) -> bool:
    """Whether every closed-loop root lies in the open left half-plane at this K."""
    return any(low < loop_gain and (high is None or loop_gain < high) for low, high in stable_gain_intervals(loop))


def unstable_at_small_gain(loop: OpenLoop) -> int:
    """Unstable roots as K goes to zero: open-loop ones, cancelled ones, poles on the axis that leave it rightwards."""
    zeros, poles, cancelled = unpaired(loop.zeros, loop.poles)
    count = int(np.sum(poles.real > 0.0)) + int(np.sum(cancelled.real >= 0.0))
    left = list(poles[poles.real == 0.0])
    while left:
        pole = left[0]
        same = [p for p in left if abs(p - pole) <= _ONE_POLE * abs(pole)]
        left = [p for p in left if abs(p - pole) > _ONE_POLE * abs(pole)]
        others = np.array([p for p in poles if p.real != 0.0 or abs(p - pole) > _ONE_POLE * abs(pole)], complex)
        count += _leaving_right(loop, complex(pole), len(same), zeros, others)
    return count


def departure_angles(
    loop: OpenLoop, pole: complex, multiplicity: int, zeros: ComplexArray, others: ComplexArray
) -> list[float]:
    """Angles, rad, at which the locus leaves a pole: (s - pole)^m = -K c with c = lim (s - pole)^m G_L(s)."""
    angle = np.pi + (0.0 if loop.leading > 0.0 else np.pi)
    angle += float(np.sum(np.angle(pole - zeros)) - np.sum(np.angle(pole - others)) - loop.dead_time * pole.imag)
    if loop.hold is not None and pole != 0.0:
        angle += float(np.angle((1.0 - np.exp(-pole * loop.hold)) / pole))
    return [(angle + 2.0 * np.pi * k) / multiplicity for k in range(multiplicity)]


def _leaving_right(loop: OpenLoop, pole: complex, multiplicity: int, zeros: ComplexArray, others: ComplexArray) -> int:
    """Branches that leave a pole on the axis to the right; where they leave along it, the next order decides."""
    bend = complex(np.sum(1.0 / (pole - zeros)) - np.sum(1.0 / (pole - others)) - loop.dead_time)
    if loop.hold is not None:
        bend += loop.hold * complex(hold_log_derivative(np.asarray(pole * loop.hold)))
    scale = float(np.sum(1.0 / np.abs(pole - zeros)) + np.sum(1.0 / np.abs(pole - others))) + loop.delay
    right = 0
    for angle in departure_angles(loop, pole, multiplicity, zeros, others):
        lean = math.cos(angle)
        if abs(lean) < _TIE:
            # s - pole = s1 + s1^2 bend/m with s1^2 = -|s1|^2
            lean = -bend.real if abs(bend.real) > _TIE * scale else 0.0
            right += lean >= 0.0
        else:
            right += lean > 0.0
    return right


def _neutral(loop: OpenLoop) -> bool:
    return loop.relative_degree == 0 and loop.hold is None and loop.dead_time > 0.0


__all__ = [
    "AxisCrossing",
    "StableInterval",
    "departure_angles",
    "is_stable",
    "stable_gain_intervals",
    "unstable_at_small_gain",
    "unstable_roots",
]
