"""The point of the locus nearest to a wished one, and what the magnitude condition says at the wish itself."""

import cmath
import math
from dataclasses import dataclass
from itertools import islice

import numpy as np

from .condition import LocusError, LocusPoint, angle_residual_deg, locus_point
from .loop import ComplexArray, OpenLoop

ON_LOCUS_DEG = 0.01  # within which the angle condition counts as met
_STEPS, _HALVINGS = 25, 12
_NEAR = 1e-6  # of the scale: over which the slope's own slope is taken
_RINGS, _RAYS = 80, 96  # of the net around the wish in which the locus is looked for
_STARTS, _FEET = 12, 4


@dataclass(frozen=True)
class Wished:
    """The answer to a wished closed-loop pole.

    Attributes
    ----------
    point : LocusPoint
        The wish, upper half-plane, with K = 1/|G_L| there; not finite: no number can hold it. Off the locus no K > 0
        puts a pole there.
    on_locus : bool
        The angle condition is met within 0.01 deg.
    nearest : LocusPoint
        The nearest point of the locus, the wish itself where it lies on it. K is 0 at an open-loop pole and infinite at
        a zero, where a branch ends.
    """

    point: LocusPoint
    on_locus: bool
    nearest: LocusPoint

    @property
    def distance(self) -> float:
        """From the wish to the nearest point, 1/s."""
        return abs(self.nearest.point - self.point.point)


def ask(loop: OpenLoop, wished: complex) -> Wished:
    """K, angle residual and the nearest point of the locus for a wished pole (1/s).

    Raises
    ------
    LocusError
        No point of the locus was found.

    Examples
    --------
    >>> found = ask(OpenLoop((1.0,), (1.0, 2.0, 0.0)), complex(-1.0, 2.0))
    >>> found.on_locus, round(found.point.loop_gain, 9)
    (True, 5.0)
    >>> found = ask(OpenLoop((1.0,), (1.0, 2.0, 0.0)), complex(-3.0, 2.0))
    >>> at = found.nearest.point
    >>> found.on_locus, round(at.real, 6), round(at.imag, 6), round(found.nearest.loop_gain, 6)
    (False, -1.0, 2.0, 5.0)
    """
    wished = complex(wished.real, abs(wished.imag))
    end = _end_at(loop, wished)
    if end is not None:
        return Wished(end, True, end)
    with np.errstate(all="ignore"):
        size = abs(complex(loop.at(wished)))
    if not 1e-300 < size < 1e300:
        return Wished(LocusPoint(wished, math.nan, math.nan), False, nearest_point_on_locus(loop, wished))
    point = locus_point(loop, wished)
    on_locus = abs(point.angle_residual_deg) <= ON_LOCUS_DEG
    return Wished(point, on_locus, point if on_locus else nearest_point_on_locus(loop, wished))


def nearest_point_on_locus(loop: OpenLoop, wished: complex) -> LocusPoint:
    """The point of the locus nearest to a wished one, with its gain.

    Off the real axis it is the foot of a perpendicular from the wish, angle(-G_L(s)) = 0 and
    Re[(G_L'/G_L)(s - wished)] = 0, sought from where a net around the wish crosses the locus; on the real axis it is
    the point below the wish, or an end of a stretch; and a branch may end at a pole or zero nearer than any foot.

    Raises
    ------
    LocusError
        None was found.
    """
    wished = complex(wished)
    feet = (foot for start in _starts(loop, wished) if (foot := _foot(loop, wished, start)))
    found = [locus_point(loop, foot) for foot in islice(feet, _FEET)]
    found += [locus_point(loop, below) for below in _below(loop, wished)]
    found += [LocusPoint(complex(root), 0.0, 0.0) for root in loop.poles]
    found += [LocusPoint(complex(root), math.inf, 0.0) for root in loop.zeros]
    if not found:
        raise LocusError("no point of the locus was found near the wish", where="locus", found=f"{wished:.6g} 1/s")
    return min(found, key=lambda each: abs(each.point - wished))


def _end_at(loop: OpenLoop, wished: complex) -> LocusPoint | None:
    """A pole or zero of the open loop that is the wish."""
    for roots, gain in ((loop.poles, 0.0), (loop.zeros, math.inf)):
        if np.any(np.abs(roots - wished) <= 1e-12 * abs(wished)):
            return LocusPoint(wished, gain, 0.0)
    return None


def _starts(loop: OpenLoop, wished: complex) -> ComplexArray:
    """Places beside the locus on rays from the wish, the nearest ones, and the wish."""
    scale = max(abs(wished), float(np.max(np.abs(loop.poles), initial=0.0)), 1e-9)
    reach = scale * np.concatenate([[0.0], np.geomspace(1e-4, 6.0, _RINGS)])
    net = wished + reach[:, None] * np.exp(2j * np.pi * (np.arange(_RAYS) + 0.37) / _RAYS)
    with np.errstate(all="ignore"):
        turn = np.angle(-loop.at(net))
    passed = (turn[1:] * turn[:-1] <= 0.0) & (np.abs(turn[1:]) + np.abs(turn[:-1]) < np.pi)
    ring, ray = np.nonzero(passed)  # by rising distance
    near = 0.5 * (net[ring, ray] + net[ring + 1, ray])
    return np.concatenate([[wished], near[:_STARTS]])


def _foot(loop: OpenLoop, wished: complex, s: complex) -> complex | None:
    """The foot of a perpendicular that is reached by walking along the locus of K > 0 from beside s.

    Newton's method on half the squared distance over u = ln K, with ds/du = -1/g and d2s/du2 = -g'/g^3, g = G_L'/G_L;
    a step is halved until it brings the point nearer.
    """
    scale = abs(wished) + abs(s)
    at = _onto(loop, s)
    for _ in range(_STEPS):
        if at is None:
            return None
        away = at - wished
        slope = complex(loop.log_derivative(at))
        bend = complex(loop.log_derivative(at + _NEAR * scale) - loop.log_derivative(at - _NEAR * scale))
        along, curved = -1.0 / slope, -bend / (2.0 * _NEAR * scale) / slope**3
        uphill = (away.conjugate() * along).real
        bowl = abs(along) ** 2 + (away.conjugate() * curved).real
        step = -uphill * along / (bowl if bowl > 0.1 * abs(along) ** 2 else abs(along) ** 2)
        if not abs(step) > 1e-14 * scale:
            break
        nearer = _nearer(loop, wished, at, step)
        if nearer is None:
            break
        at = nearer
    return complex(at.real) if at is not None and abs(at.imag) <= 1e-9 * scale else at


def _nearer(loop: OpenLoop, wished: complex, at: complex, step: complex) -> complex | None:
    """The locus beside at + step, or beside a shorter step, that is nearer to the wish."""
    for _ in range(_HALVINGS):
        trial = _onto(loop, at + step)
        if trial is not None and abs(trial - wished) <= abs(at - wished) * (1.0 + 1e-15):
            return trial
        step *= 0.5
    return None


def _onto(loop: OpenLoop, s: complex) -> complex | None:
    """The locus of K > 0 beside s, across it; None where it is not met."""
    for _ in range(12):
        with np.errstate(all="ignore"):
            slope, value = complex(loop.log_derivative(s)), -complex(loop.at(s))
        if slope == 0.0 or value == 0.0 or not (cmath.isfinite(slope) and cmath.isfinite(value)):
            return None
        turn = cmath.phase(value)
        if abs(turn) < 1e-13:
            return s
        s -= 1j * turn / slope
    return s if abs(angle_residual_deg(loop, s)) < 1e-9 else None


def _below(loop: OpenLoop, wished: complex) -> list[complex]:
    """The real point below the wish, where it lies on the locus."""
    s = complex(wished.real)
    with np.errstate(all="ignore"):
        value = complex(loop.at(s))
    return [s] if cmath.isfinite(value) and value.real < 0.0 else []
