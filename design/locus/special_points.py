"""Breakaway and break-in points, departure and arrival angles, asymptotes: with the exact dead time and hold."""

import math
from dataclasses import dataclass

import numpy as np

from .condition import angle_residual_deg, loop_gain_at
from .departure import departure_angles
from .enclosure import unpaired
from .loop import ComplexArray, FloatArray, OpenLoop

_ONE_POINT = 1e-5  # relative distance at which computed saddle points are one multiple point
_ONE_ROOT = 1e-6
_ON_LOCUS_DEG = 1e-4


@dataclass(frozen=True)
class SaddlePoint:
    """A point where G_L'(s) = 0: two or more branches meet there if K > 0 and the angle condition holds.

    Attributes
    ----------
    point : complex, 1/s
    loop_gain : float
        -1/G_L(s) on the real axis, sign included; 1/|G_L(s)| elsewhere.
    on_locus : bool
        K > 0 and the angle residual is zero: a breakaway or break-in point.
    branches : int
        How many branches meet.
    """

    point: complex
    loop_gain: float
    on_locus: bool
    branches: int


@dataclass(frozen=True)
class RootAngles:
    """Angles at which the locus leaves a pole or arrives at a zero.

    Attributes
    ----------
    root : complex, 1/s
    angles_deg : tuple of float
        In (-180, 180], one for each branch.
    """

    root: complex
    angles_deg: tuple[float, ...]


@dataclass(frozen=True)
class Asymptotes:
    """Where branches go as K grows without bound.

    Attributes
    ----------
    centroid : float or None, 1/s
        Of the straight lines of a loop without delay; None when there are none.
    angles_deg : tuple of float
        Their directions in (-180, 180].
    heights : tuple of float, rad/s
        With dead time the branches end on horizontal lines instead; the lowest ones in the upper half-plane.
    """

    centroid: float | None
    angles_deg: tuple[float, ...]
    heights: tuple[float, ...]


def saddle_points(loop: OpenLoop) -> tuple[SaddlePoint, ...]:
    """Every root of N'D - L N D - N D' = 0 with the gain there, K < 0 included, by rising |s|.

    With a hold the points start from half of it as dead time and are followed to G_L'(s) = 0 by the secant method.
    """
    zeros, poles, _ = unpaired(loop.zeros, loop.poles)
    numerator, denominator = np.atleast_1d(np.poly(zeros)).real, np.atleast_1d(np.poly(poles)).real
    above, below = np.polyder(numerator), np.polyder(denominator)
    slopes: FloatArray = np.polysub(np.polymul(above, denominator), np.polymul(numerator, below))
    equation = np.polysub(slopes, loop.delay * np.polymul(numerator, denominator))
    points = np.asarray(np.roots(np.trim_zeros(equation, "f")), dtype=np.complex128)
    multiple_poles = np.concatenate([_repeated(poles), _repeated(zeros)])
    groups = _grouped(points, _ONE_POINT)
    found = [(complex(np.mean(group)), len(group) + 1) for group in groups]
    found = [(s, n) for s, n in found if not np.any(np.abs(multiple_poles - s) <= _ONE_POINT * (abs(s) + 1e-300))]
    if loop.hold is not None:
        found = [(t, n) for s, n in found if (t := _followed(loop, s)) is not None]
    return tuple(sorted((_saddle(loop, s, n) for s, n in found), key=lambda p: abs(p.point)))


def breakaway_points(loop: OpenLoop) -> tuple[SaddlePoint, ...]:
    """The saddle points on the locus of K > 0: breakaway and break-in points, complex ones too.

    Examples
    --------
    >>> [round(p.point.real, 4) for p in breakaway_points(OpenLoop((1.0,), (1.0, 3.0, 2.0, 0.0)))]
    [-0.4226]
    """
    return tuple(point for point in saddle_points(loop) if point.on_locus)


def departures(loop: OpenLoop) -> tuple[RootAngles, ...]:
    """Angles of departure from every open-loop pole, dead time and hold included."""
    zeros, poles, _ = unpaired(loop.zeros, loop.poles)
    return tuple(
        RootAngles(pole, tuple(_degrees(a) for a in departure_angles(loop, pole, count, zeros, others)))
        for pole, count, others in _with_others(poles)
    )


def arrivals(loop: OpenLoop) -> tuple[RootAngles, ...]:
    """Angles at which the locus arrives at every finite zero, pointing from the zero to where the branch comes from.

    (s - zero)^m = -1/(K c) with c = lim G_L(s)/(s - zero)^m.
    """
    zeros, poles, _ = unpaired(loop.zeros, loop.poles)
    found = []
    for zero, count, others in _with_others(zeros):
        angle = departure_angles(loop, zero, 1, others, poles)[0]  # that of -c
        angles = tuple(_degrees((-angle + 2.0 * math.pi * k) / count) for k in range(count))
        found.append(RootAngles(zero, angles))
    return tuple(found)


def asymptotes(loop: OpenLoop, heights: int = 3) -> Asymptotes:
    """Asymptotes for large K: (2k + 1) 180 deg/(n - m) about the centroid, or Im s = (2k + 1) pi/L with dead time."""
    zeros, poles, _ = unpaired(loop.zeros, loop.poles)
    shift = 0.0 if loop.leading > 0.0 else 1.0
    if loop.dead_time > 0.0:
        first = 1.0 - shift
        return Asymptotes(None, (), tuple((2 * k + first) * math.pi / loop.dead_time for k in range(heights)))
    surplus = poles.size - zeros.size
    if surplus == 0 or loop.hold is not None:
        return Asymptotes(None, (), ())
    centroid = float((np.sum(poles) - np.sum(zeros)).real / surplus)
    angles = tuple(_degrees((2 * k + 1 - shift) * math.pi / surplus) for k in range(surplus))
    return Asymptotes(centroid, angles, ())


def _saddle(loop: OpenLoop, s: complex, branches: int) -> SaddlePoint:
    if abs(s.imag) <= 1e-7 * abs(s):
        s = complex(s.real)
        gain = float((-1.0 / complex(loop.at(s))).real)
        return SaddlePoint(s, gain, gain > 0.0, branches)
    return SaddlePoint(s, loop_gain_at(loop, s), abs(angle_residual_deg(loop, s)) < _ON_LOCUS_DEG, branches)


def _followed(loop: OpenLoop, s: complex) -> complex | None:
    """Secant method on G_L'/G_L = 0."""
    before, s = s * (1.0 + 1e-4), complex(s)
    value = complex(loop.log_derivative(before))
    for _ in range(60):
        after = complex(loop.log_derivative(s))
        if after == value or not math.isfinite(abs(after)):
            return None
        step = after * (s - before) / (after - value)
        before, value, s = s, after, s - step
        if abs(step) <= 1e-14 * abs(s):
            return s
    return None


def _grouped(points: ComplexArray, share: float) -> list[ComplexArray]:
    groups: list[list[complex]] = []
    for point in points:
        home = next((g for g in groups if abs(np.mean(g) - point) <= share * abs(point)), None)
        if home is None:
            groups.append([complex(point)])
        else:
            home.append(complex(point))
    return [np.array(g) for g in groups]


def _with_others(roots: ComplexArray) -> list[tuple[complex, int, ComplexArray]]:
    """Each distinct root with its multiplicity and the remaining roots."""
    found = []
    for group in _grouped(roots, _ONE_ROOT):
        root = complex(np.mean(group))
        others = roots[np.abs(roots - root) > 2.0 * _ONE_ROOT * abs(root)]
        found.append((root, len(group), others))
    return found


def _repeated(roots: ComplexArray) -> ComplexArray:
    """Roots of multiplicity two and more: they solve the equation without being saddle points."""
    return np.array([root for root, count, _ in _with_others(roots) if count > 1], complex)


def _degrees(angle: float) -> float:
    degrees = math.degrees(math.remainder(angle, 2.0 * math.pi))
    return 180.0 if degrees <= -180.0 + 1e-12 else degrees
