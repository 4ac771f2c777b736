"""Where the locus crosses the imaginary axis, a damping ray, a settling line or a natural-frequency circle."""

import math
from dataclasses import dataclass

import numpy as np

from ...ident.errors import RequestError
from .condition import LocusError, LocusPoint, angle_residual_deg, locus_point, loop_gain_at
from .departure import unstable_at_small_gain
from .enclosure import on_locus, unpaired
from .loop import FloatArray, OpenLoop
from .paths import LeftArc, Line, Path

_AXIS = Line(0.0, 1j)
_MOST_TURNING = 1e5  # rad of the delay's angle along the axis, some 16,000 critical gains


@dataclass(frozen=True)
class AxisCrossing:
    """A critical gain: roots on the imaginary axis.

    Attributes
    ----------
    frequency : float, rad/s
        Zero for a real root; infinite where a real root passes through infinity.
    loop_gain : float
    direction : int
        +1 when the roots enter the right half-plane as K grows, -1 when they leave it.
    roots : int
        How many cross: two of a pair, one real root.
    """

    frequency: float
    loop_gain: float
    direction: int
    roots: int


def axis_crossings(loop: OpenLoop, up_to_gain: float = 0.0) -> tuple[AxisCrossing, ...]:
    """Crossings of the imaginary axis with their critical gains, exact dead time and hold, by rising gain.

    Every crossing out of the right half-plane is among them, every crossing with a gain up to `up_to_gain`, and every
    one up to the gain above which the loop is unstable for good. With dead time there are infinitely many above that.

    Parameters
    ----------
    loop : OpenLoop
    up_to_gain : float

    Raises
    ------
    LocusError
        More than some 16,000 critical gains lie below `up_to_gain`.

    Examples
    --------
    >>> [(round(c.loop_gain, 9), round(c.frequency, 6)) for c in axis_crossings(OpenLoop((1.0,), (1.0, 3.0, 2.0, 0.0)))]
    [(6.0, 1.414214)]
    """
    fixed = [*_at_origin(loop), *_at_infinity(loop)]
    if loop.delay == 0.0:
        end = _polynomial_reach(loop, _AXIS)
        found = _along_axis(loop, end) if end > 0.0 else []
        return tuple(sorted([*fixed, *found], key=lambda c: c.loop_gain))
    end, ceiling, start = _falling_from(loop), _ceiling(loop), unstable_at_small_gain(loop)
    while True:
        found = sorted([*fixed, *_along_axis(loop, end)], key=lambda c: c.loop_gain)
        covered = _least_gain_beyond(loop, end)
        if covered >= min(max(_last_stable_gain(found, start), up_to_gain), ceiling * (1.0 - 1e-9)):
            return tuple(found)
        if end * loop.delay > _MOST_TURNING:
            break
        end *= 2.0
    if covered < up_to_gain < ceiling:
        raise LocusError(
            "too many critical gains lie below the gain asked for",
            where="crossings",
            found=f"complete up to K = {covered:g}",
            expected=f"K = {up_to_gain:g}",
        )
    return tuple(found)


def ray_crossings(loop: OpenLoop, damping_ratio: float, reach: float | None = None) -> tuple[LocusPoint, ...]:
    """Every point of the locus on a ray of constant damping ratio in the upper left half-plane, from the origin on.

    Parameters
    ----------
    loop : OpenLoop
    damping_ratio : float
        0 < damping_ratio < 1.
    reach : float or None, 1/s
        How far from the origin to look; None: see `default_reach` (with dead time the chains of poles cross every ray
        infinitely often, farther and farther out, at gains that go to zero).

    Raises
    ------
    RequestError
        The damping ratio is not between zero and one.
    """
    if not 0.0 < damping_ratio < 1.0:
        raise RequestError("no such ray", where="damping ratio", found=str(damping_ratio), expected="between 0 and 1")
    ray = Line(0.0, complex(-damping_ratio, math.sqrt(1.0 - damping_ratio**2)))
    return _points(loop, ray, on_locus(loop, ray, _reach(loop, ray, reach)))


def line_crossings(loop: OpenLoop, abscissa: float, reach: float | None = None) -> tuple[LocusPoint, ...]:
    """Every point of the locus with real part `abscissa` (1/s) and imaginary part >= 0, by imaginary part.

    Parameters
    ----------
    loop : OpenLoop
    abscissa : float, 1/s
        -4/ts for a 2 % settling time ts (common practice); negative is left.
    reach : float or None, rad/s
        Highest imaginary part; None: see `default_reach`.
    """
    line = Line(complex(abscissa), 1j)
    start = _points(loop, line, np.zeros(1)) if _real_on_locus(loop, abscissa) else ()
    return start + _points(loop, line, on_locus(loop, line, _reach(loop, line, reach)))


def circle_crossings(loop: OpenLoop, natural_frequency: float) -> tuple[LocusPoint, ...]:
    """Every point of the locus in the upper left half-plane at this distance (rad/s) from the origin.

    Raises
    ------
    RequestError
        The natural frequency is not positive.
    """
    if not natural_frequency > 0.0:
        raise RequestError("no such circle", where="natural frequency", found=str(natural_frequency), expected="> 0")
    arc = LeftArc(natural_frequency)
    start = _points(loop, arc, np.zeros(1)) if _real_on_locus(loop, -natural_frequency) else ()
    return start + _points(loop, arc, on_locus(loop, arc, 1.0))


def default_reach(loop: OpenLoop) -> float:
    """4 times the largest open-loop root and, with delay, 12 pi over the total delay, 1/s."""
    largest = max((abs(root) for root in (*loop.poles, *loop.zeros)), default=0.0)
    return 4.0 * float(largest) + (12.0 * math.pi / loop.delay if loop.delay > 0.0 else 1.0)


def _reach(loop: OpenLoop, path: Path, wished: float | None) -> float:
    if loop.rational:
        return min(_polynomial_reach(loop, path), wished or math.inf)
    return wished or default_reach(loop)


def _points(loop: OpenLoop, path: Path, t: FloatArray) -> tuple[LocusPoint, ...]:
    return tuple(locus_point(loop, complex(s)) for s in path.at(t))


def _real_on_locus(loop: OpenLoop, s: float) -> bool:
    if not 0.0 < loop_gain_at(loop, s) < math.inf:
        return False
    return abs(angle_residual_deg(loop, s)) < 1.0  # on the real axis it is 0 or 180


def _along_axis(loop: OpenLoop, end: float) -> list[AxisCrossing]:
    frequency = on_locus(loop, _AXIS, end)
    gain = 1.0 / np.abs(loop.at(1j * frequency))
    slope = loop.log_derivative(1j * frequency).real  # of the angle over frequency
    return [
        AxisCrossing(float(w), float(k), 1 if turn < 0.0 else -1, 2)
        for w, k, turn in zip(frequency, gain, slope, strict=True)
    ]


def _at_origin(loop: OpenLoop) -> list[AxisCrossing]:
    """A real root passes through zero where G_L(0) is finite and negative."""
    zeros, poles, _ = unpaired(loop.zeros, loop.poles)
    if 0.0 in poles or 0.0 in zeros:
        return []
    value = loop.leading * float(np.prod(-zeros).real / np.prod(-poles).real)
    if value >= 0.0:
        return []
    slope = np.sum(1.0 / -zeros).real - np.sum(1.0 / -poles).real - loop.delay
    return [AxisCrossing(0.0, -1.0 / value, 1 if slope < 0.0 else -1, 1)]


def _at_infinity(loop: OpenLoop) -> list[AxisCrossing]:
    """Without delay a real root passes through infinity where G_L(infinity) is finite and negative."""
    if not (loop.rational and loop.relative_degree == 0 and loop.leading < 0.0):
        return []
    zeros, poles, _ = unpaired(loop.zeros, loop.poles)
    # near infinity 1 + K g (1 + c/s) = 0 with c = sum of poles - sum of zeros, so s = -K g c/(1 + K g) with g < 0
    slope = (np.sum(poles) - np.sum(zeros)).real
    if slope == 0.0:
        return []
    return [AxisCrossing(math.inf, -1.0 / loop.leading, 1 if slope < 0.0 else -1, 1)]


def _polynomial_reach(loop: OpenLoop, path: Path) -> float:
    """A bound on the t of all crossings without dead time: of the real roots of Im[N(s(t)) conj D(s(t))]."""
    zeros, poles, _ = unpaired(loop.zeros, loop.poles)
    numerator, denominator = np.poly(path.place(zeros)), np.poly(path.place(poles))
    turn = (
        (loop.leading * complex(path.rate(np.zeros(1))[0]) ** (zeros.size - poles.size))
        if zeros.size or poles.size
        else 1
    )
    product = np.polymul(np.atleast_1d(turn * numerator), np.conj(np.atleast_1d(denominator)))
    scale = np.polymul(np.abs(np.atleast_1d(turn * numerator)), np.abs(np.atleast_1d(denominator)))
    odd = np.where(np.abs(product.imag) > 1e-13 * scale, product.imag, 0.0)
    odd = np.trim_zeros(odd, "f")
    if odd.size < 2:
        return 0.0
    shares = np.abs(odd[1:] / odd[0]) ** (1.0 / np.arange(1, odd.size))
    return float(2.0 * shares.max())  # Fujiwara's bound


def _falling_from(loop: OpenLoop) -> float:
    """A frequency beyond which the angle falls for good and the bound of _least_gain_beyond rises, rad/s."""
    zeros, poles, _ = unpaired(loop.zeros, loop.poles)
    roots = np.concatenate([zeros, poles])
    if roots.size == 0:
        return 2.0 * math.pi / loop.delay
    radius = float(np.max(np.abs(roots)))
    turning = math.sqrt(float(np.sum(np.abs(roots.real))) / loop.delay)
    return 1.5 * radius + turning + math.pi / loop.delay


def _least_gain_beyond(loop: OpenLoop, frequency: float) -> float:
    """A lower bound of 1/|G_L(j w)| for all w beyond a frequency that exceeds every root."""
    zeros, poles, _ = unpaired(loop.zeros, loop.poles)
    largest = abs(loop.leading) * np.prod(frequency + np.abs(zeros)) / np.prod(frequency - np.abs(poles))
    if loop.hold is not None:
        largest *= min(1.0, 2.0 / (frequency * loop.hold))
    return float(1.0 / largest)


def _ceiling(loop: OpenLoop) -> float:
    """With dead time and as many zeros as poles infinitely many roots are unstable above 1/|G_L(infinity)|."""
    neutral = loop.relative_degree == 0 and loop.hold is None and loop.dead_time > 0.0
    return 1.0 / abs(loop.leading) if neutral else math.inf


def _last_stable_gain(found: list[AxisCrossing], count: int) -> float:
    """The end of the last stable interval that these crossings (by rising gain) leave; infinite when it is open."""
    last = 0.0
    for crossing in found:
        last = crossing.loop_gain if count == 0 else last
        count += crossing.direction * crossing.roots
    return math.inf if count == 0 else last
