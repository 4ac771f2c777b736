"""The open loop, its closed-loop roots and special points in mpmath at 40 digits, for the tests of the locus."""

import mpmath
import numpy as np
from gainwright.design.locus.loop import OpenLoop

mpmath.mp.dps = 40


def polynomial(coefficients: tuple[float, ...], s: mpmath.mpc) -> mpmath.mpc:
    """Highest power first, by Horner's rule."""
    total = mpmath.mpc(0)
    for coefficient in coefficients:
        total = total * s + mpmath.mpf(coefficient)
    return total


def value(loop: OpenLoop, s: mpmath.mpc) -> mpmath.mpc:
    """G_L(s)."""
    ratio = polynomial(loop.numerator, s)
    ratio /= polynomial(loop.denominator, s)
    ratio *= mpmath.exp(-s * mpmath.mpf(loop.dead_time))
    if loop.hold is not None and s != 0:
        ratio *= (1 - mpmath.exp(-s * mpmath.mpf(loop.hold))) / (s * mpmath.mpf(loop.hold))
    return ratio


def equation(loop: OpenLoop, gain: float, s: mpmath.mpc) -> mpmath.mpc:
    """D + K N exp(-s L) (times the hold), zero at closed-loop roots."""
    below = polynomial(loop.denominator, s)
    above = polynomial(loop.numerator, s) * mpmath.exp(-s * mpmath.mpf(loop.dead_time))
    if loop.hold is not None and s != 0:
        above *= (1 - mpmath.exp(-s * mpmath.mpf(loop.hold))) / (s * mpmath.mpf(loop.hold))
    return below + mpmath.mpf(gain) * above


def newton(function, s: complex, steps: int = 12) -> mpmath.mpc:
    """A root of a function near s, to 30 digits, slopes by differences in 40 digits."""
    s = mpmath.mpc(s)
    h = mpmath.mpf("1e-20") * (abs(s) + mpmath.mpf("1e-6"))
    for _ in range(steps):
        step = function(s) * 2 * h / (function(s + h) - function(s - h))
        s -= step
        if abs(step) < mpmath.mpf("1e-30") * (abs(s) + mpmath.mpf("1e-6")):
            break
    return s


def condition(loop: OpenLoop, gain: float, s: mpmath.mpc) -> float:
    """How far the root s moves, 1/s, for a relative change of every coefficient and of the delay.

    The sizes of the terms over |f'(s)|; at least |s|.
    """
    size = abs(s)
    terms = polynomial(tuple(map(abs, loop.denominator)), size)
    factor = abs(mpmath.exp(-s * mpmath.mpf(loop.dead_time))) * (1 + size * mpmath.mpf(loop.dead_time))
    if loop.hold is not None and s != 0:
        span = mpmath.mpf(loop.hold)
        factor *= (1 + abs(mpmath.exp(-s * span))) / (size * span) * (1 + size * span)
    terms += mpmath.mpf(gain) * polynomial(tuple(map(abs, loop.numerator)), size) * factor
    h = mpmath.mpf("1e-20") * (size + mpmath.mpf("1e-6"))
    slope = abs((equation(loop, gain, s + h) - equation(loop, gain, s - h)) / (2 * h))
    return float(mpmath.re(max(mpmath.re(terms) / slope, size)))


def slope_roots(loop: OpenLoop) -> list[complex]:
    """Roots of N'D - L N D - N D' to 40 digits; for loops without a hold."""
    n, d = np.poly1d(loop.numerator), np.poly1d(loop.denominator)
    coefficients = np.polyadd((n.deriv() * d - n * d.deriv()).coeffs, -loop.dead_time * (n * d).coeffs)
    coefficients = np.trim_zeros(coefficients, "f")
    if coefficients.size < 2:
        return []
    ascending = [mpmath.mpf(c) for c in coefficients[::-1]]
    return [complex(root) for root in mpmath.polyroots(ascending, maxsteps=500, extraprec=400, asc=True)]
