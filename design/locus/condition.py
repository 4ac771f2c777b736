"""The magnitude condition K = 1/|G_L(s)| and the angle condition that says where it may be used."""

import math
from dataclasses import dataclass

import numpy as np

from ...ident.errors import GainwrightError
from .loop import OpenLoop, hold_factor

_ITERATIONS = 60
_ON_LOCUS = 1e-12  # |ln(-K G_L)| at which a point counts as on the locus


class LocusError(GainwrightError):
    """No point of the locus could be reached from where the search began."""


@dataclass(frozen=True)
class Vector:
    """One vector of the working, from a root of the open loop to the point.

    Attributes
    ----------
    root : complex, 1/s
    length : float, 1/s
    angle_deg : float
    """

    root: complex
    length: float
    angle_deg: float


@dataclass(frozen=True)
class Working:
    """The magnitude condition written out at one point, for a report.

    product = |leading| times the zero lengths over the pole lengths times both factors; loop_gain = 1/product.

    Attributes
    ----------
    point : complex, 1/s
    zeros, poles : tuple of Vector
    leading : float
        Ratio of the leading coefficients, sign included.
    dead_time_factor, hold_factor : float
        |exp(-s L)| and |(1 - exp(-s T))/(s T)|; one where there is none.
    product : float
        |G_L(s)|.
    loop_gain : float
    angle_residual_deg : float
    """

    point: complex
    zeros: tuple[Vector, ...]
    poles: tuple[Vector, ...]
    leading: float
    dead_time_factor: float
    hold_factor: float
    product: float
    loop_gain: float
    angle_residual_deg: float


@dataclass(frozen=True)
class LocusPoint:
    """A point of the locus with the gain that puts a closed-loop pole there.

    Attributes
    ----------
    point : complex, 1/s
    loop_gain : float
    angle_residual_deg : float
    """

    point: complex
    loop_gain: float
    angle_residual_deg: float


def loop_gain_at(loop: OpenLoop, s: complex) -> float:
    """K = 1/|G_L(s)|, the gain that makes s a closed-loop pole where the angle condition holds there.

    Zero at an open-loop pole, infinite at a zero.

    Examples
    --------
    >>> round(loop_gain_at(OpenLoop((1.0,), (1.0, 3.0, 2.0, 0.0)), complex(-1 / 3, 3**-0.5)), 12)
    1.037037037037
    """
    with np.errstate(divide="ignore", invalid="ignore"):
        size = abs(complex(loop.at(s)))
    if size == 0.0:
        return math.inf
    return 0.0 if not math.isfinite(size) else 1.0 / size


def angle_residual_deg(loop: OpenLoop, s: complex) -> float:
    """How far the angle of G_L(s) is from 180 deg, in (-180, 180] deg; zero on the locus of K > 0."""
    residual = math.degrees(np.angle(-complex(loop.at(s))))
    return 180.0 if residual <= -180.0 else residual


def locus_point(loop: OpenLoop, s: complex) -> LocusPoint:
    """The point with its gain and its angle residual."""
    return LocusPoint(complex(s), loop_gain_at(loop, s), angle_residual_deg(loop, s))


def point_on_locus(loop: OpenLoop, loop_gain: float, near: complex) -> complex:
    """The closed-loop pole at this gain that Newton's method reaches from a nearby point, 1/s.

    Newton on ln(-K G_L(s)) = 0, whose steps are ln(-K G_L)/(G_L'/G_L), shortened until the residual falls.

    Raises
    ------
    LocusError
        The gain is not positive, or no pole was reached.
    """
    if not (loop_gain > 0.0 and math.isfinite(loop_gain)):
        raise LocusError("the loop gain must be positive", where="locus", found=str(loop_gain), expected="K > 0")
    s = _settled(loop, loop_gain, complex(near))
    if s is None:
        raise LocusError(
            "no closed-loop pole was reached",
            where=f"locus at K = {loop_gain:g}",
            found=f"start at {near:.6g} 1/s",
            expected="a start nearer to a pole than to the other poles of the loop",
            advice="start from a root of closed_loop_roots at this gain",
        )
    return s


def working(loop: OpenLoop, s: complex) -> Working:
    """The vector lengths and factors of |G_L(s)| = 1/K, for a report."""
    s = complex(s)
    zeros = tuple(_vector(s, root) for root in loop.zeros)
    poles = tuple(_vector(s, root) for root in loop.poles)
    dead = math.exp(-s.real * loop.dead_time)
    held = 1.0 if loop.hold is None else abs(complex(hold_factor(np.asarray(s * loop.hold))))
    product = abs(loop.leading) * dead * held
    product *= math.prod(v.length for v in zeros) / math.prod(v.length for v in poles)
    return Working(s, zeros, poles, loop.leading, dead, held, product, 1.0 / product, angle_residual_deg(loop, s))


def _vector(s: complex, root: complex) -> Vector:
    arrow = s - complex(root)
    return Vector(complex(root), abs(arrow), math.degrees(math.atan2(arrow.imag, arrow.real)))


def _misfit(loop: OpenLoop, loop_gain: float, s: complex) -> complex:
    """ln(-K G_L(s)), principal value; infinite where G_L is zero or infinite."""
    with np.errstate(all="ignore"):
        value = complex(np.log(-loop_gain * loop.at(s)))
    return value if math.isfinite(value.real) else complex(math.inf, 0.0)


def _settled(loop: OpenLoop, loop_gain: float, s: complex) -> complex | None:
    misfit = _misfit(loop, loop_gain, s)
    if not math.isfinite(misfit.real):  # exactly on an open-loop pole or zero: step off it
        s += 1e-6 * (abs(s) or 1.0) * (1.0 + 1.0j)
        misfit = _misfit(loop, loop_gain, s)
    for _ in range(_ITERATIONS):
        slope = complex(loop.log_derivative(s)) if math.isfinite(misfit.real) else 0.0
        if slope == 0.0 or not math.isfinite(abs(slope)):
            return None
        step = misfit / slope
        share = 1.0
        trial, after = s - step, _misfit(loop, loop_gain, s - step)
        while abs(after) > abs(misfit) and share > 1e-4 and abs(step) > 4e-16 * abs(s):
            share *= 0.5
            trial = s - share * step
            after = _misfit(loop, loop_gain, trial)
        small = abs(share * step) <= 4e-16 * abs(trial)
        if abs(after) < abs(misfit):
            s, misfit = trial, after
        elif abs(misfit) < _rounding(loop, s):
            return s
        if small or abs(misfit) == 0.0:
            break
    return s if abs(misfit) < _rounding(loop, s) else None


def _rounding(loop: OpenLoop, s: complex) -> float:
    """The residual that a pole rounded to double precision may have."""
    return _ON_LOCUS + 1e-13 * abs(s) * abs(complex(loop.log_derivative(s)))
