"""A rational plant as a sum of first-order modes, each exact under a held or an interpolated command."""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from .plant import ComplexArray
from .run import FloatArray

# Two poles nearer than this (relative) are moved apart symmetrically: the plant changes by the square of it, and the
# partial fractions keep twelve digits.
_APART = 2e-4


@dataclass(frozen=True, eq=False)
class Modes:
    """G(s) = direct + double / s^2 + sum_i residue_i / (s - pole_i), one of each conjugate pair kept and doubled.

    Attributes
    ----------
    poles, residues : (m,) complex arrays; 1/s, and response unit per command unit and s
        Im(pole) >= 0; the residue of a pair is already doubled, so that the response is the real part of the sum.
    direct : float, response unit per command unit
    double : float, response unit per command unit and s^2
        Of a plant with two integrators; zero else.
    """

    poles: ComplexArray
    residues: ComplexArray
    direct: float
    double: float = 0.0


@lru_cache(maxsize=256)
def modes_of(numerator: tuple[float, ...], denominator: tuple[float, ...]) -> Modes:
    """Partial fractions of numerator(s)/denominator(s), coefficients with the highest power first.

    Poles that coincide are moved apart by 1e-4 of their size; a double pole at the origin is kept exactly as it is.

    Raises
    ------
    ValueError
        The plant has more zeros than poles, or more than two integrators.

    Examples
    --------
    >>> modes = modes_of((1.0,), (1.0, 3.0, 2.0))
    >>> sorted(float(p.real) for p in modes.poles)
    [-2.0, -1.0]
    >>> modes_of((6.0,), (1.0, 2.0, 0.0, 0.0)).double
    3.0
    """
    if len(numerator) > len(denominator):
        raise ValueError("more zeros than poles")
    lead = denominator[0]
    direct = numerator[0] / lead if len(numerator) == len(denominator) else 0.0
    rest = [n - direct * d for n, d in zip(numerator, denominator, strict=True)] if direct else list(numerator)
    found, at_origin = _exact_poles(denominator)
    moving = _apart(found)
    poles = [complex(0.0)] * min(at_origin, 1) + moving
    residues = []
    for i, pole in enumerate(poles):
        below = complex(lead)
        for j, other in enumerate(poles):
            below *= pole - other if j != i else 1.0
        residues.append(value_at(rest, pole) / (below * pole ** max(at_origin - 1, 0)) if pole or at_origin < 2 else 0j)
    double = 0.0
    if at_origin == 2:
        double, residues[0] = _at_double_origin(np.asarray(rest, dtype=float), np.asarray(denominator)[:-2])
    keep = [i for i, pole in enumerate(poles) if pole.imag >= 0]
    doubled = [residues[i] * (2.0 if poles[i].imag > 0 else 1.0) for i in keep]
    return Modes(np.array([poles[i] for i in keep], complex), np.array(doubled, complex), float(direct), double)


def value_at(coefficients: Sequence[float], s: complex) -> complex:
    """Value of a polynomial, highest power first."""
    total = complex(0.0)
    for coefficient in coefficients:
        total = total * s + coefficient
    return total


def _at_double_origin(numerator: FloatArray, moving: FloatArray) -> tuple[float, float]:
    """Coefficients of 1/s^2 and 1/s in numerator/(s^2 moving): value and slope at zero of numerator/moving."""
    top = np.concatenate([[0.0], numerator])[-2:]
    below = np.concatenate([[0.0], moving])[-2:]
    value = float(top[1] / below[1])
    return value, float((top[0] - value * below[0]) / below[1])


def _exact_poles(denominator: Sequence[float]) -> tuple[list[complex], int]:
    """Roots away from the origin, two of them in closed form without cancellation, and how many are at it."""
    coefficients = [float(c) for c in denominator]
    while coefficients and coefficients[0] == 0.0:
        coefficients = coefficients[1:]
    at_origin = 0
    while coefficients[-1] == 0.0:
        coefficients = coefficients[:-1]
        at_origin += 1
    if at_origin > 2:
        raise ValueError("more than two integrators")
    if len(coefficients) == 2:
        return [complex(-coefficients[1] / coefficients[0])], at_origin
    if len(coefficients) == 3:
        return _quadratic(*coefficients), at_origin
    return [complex(root) for root in np.roots(coefficients)], at_origin


def _quadratic(a: float, b: float, c: float) -> list[complex]:
    under = b * b - 4 * a * c
    if under < 0:
        root = complex(0.0, math.sqrt(-under))
        return [(-b + root) / (2 * a), (-b - root) / (2 * a)]
    far = -0.5 * (b + math.copysign(math.sqrt(under), b))
    return [complex(far / a), complex(c / far)]


def _apart(poles: list[complex]) -> list[complex]:
    """Move poles apart that are too near for partial fractions; conjugate symmetry is kept."""
    moved = list(poles)
    for i in range(len(moved)):
        for j in range(i):
            if abs(moved[i] - moved[j]) < _APART * abs(moved[i]):
                middle = 0.5 * (moved[i] + moved[j])
                if moved[i].imag * moved[j].imag <= 0.0:  # about the real axis: both on it
                    middle = complex(middle.real)
                moved[i], moved[j] = middle * (1 + _APART / 2), middle * (1 - _APART / 2)
    return moved
