"""For which K the closed loop is stable and how many roots are unstable, by counting over the critical gains."""

import math

from .crossings import axis_crossings
from .departure import unstable_at_small_gain
from .loop import OpenLoop

StableInterval = tuple[float, float | None]


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


def _neutral(loop: OpenLoop) -> bool:
    return loop.relative_degree == 0 and loop.hold is None and loop.dead_time > 0.0
