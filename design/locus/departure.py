"""How branches leave the open-loop poles as K grows from zero: their angles, and how many go right."""

import math

import numpy as np

from .enclosure import unpaired
from .loop import ComplexArray, OpenLoop, hold_log_derivative

_ONE_POLE = 1e-6  # relative distance at which poles on the axis count as one multiple pole
_TIE = 1e-9


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
