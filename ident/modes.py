"""A rational plant as a sum of first-order modes, each exact under a held or an interpolated command."""

from dataclasses import dataclass

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
    rest = np.polysub(numerator, direct * np.asarray(denominator)) if direct else np.asarray(numerator)
    moving, at_origin = _exact_poles(denominator)
    moving = _apart(moving)
    poles = np.concatenate([np.zeros(min(at_origin, 1)), moving])
    residues = np.empty(len(poles), dtype=np.complex128)
    for i, pole in enumerate(poles):
        others = np.concatenate([np.delete(moving, i - (at_origin > 0)), np.zeros(at_origin)]) if pole else moving
        residues[i] = np.polyval(rest, pole) / (lead * np.prod(pole - others))
    double = 0.0
    if at_origin == 2:
        double, residues[0] = _at_double_origin(np.asarray(rest, dtype=float), np.asarray(denominator)[:-2])
    keep = poles.imag >= 0
    doubled = np.where(poles.imag > 0, 2.0, 1.0)
    return Modes(poles[keep], (residues * doubled)[keep], float(direct), double)


def _at_double_origin(numerator: FloatArray, moving: FloatArray) -> tuple[float, float]:
    """Coefficients of 1/s^2 and 1/s in numerator/(s^2 moving): value and slope at zero of numerator/moving."""
    top = np.concatenate([[0.0], numerator])[-2:]
    below = np.concatenate([[0.0], moving])[-2:]
    value = float(top[1] / below[1])
    return value, float((top[0] - value * below[0]) / below[1])


def _exact_poles(denominator: tuple[float, ...]) -> tuple[ComplexArray, int]:
    """Roots away from the origin, two of them in closed form without cancellation, and how many are at it."""
    coefficients = np.trim_zeros(np.asarray(denominator, dtype=float), "f")
    at_origin = 0
    while coefficients[-1] == 0.0:
        coefficients = coefficients[:-1]
        at_origin += 1
    if at_origin > 2:
        raise ValueError("more than two integrators")
    roots = _quadratic(coefficients) if len(coefficients) == 3 else np.roots(coefficients)
    return roots.astype(np.complex128), at_origin


def _quadratic(coefficients: np.ndarray) -> ComplexArray:
    a, b, c = coefficients
    root = np.sqrt(complex(b * b - 4 * a * c))
    if root.imag:
        return np.array([(-b + root) / (2 * a), (-b - root) / (2 * a)])
    far = -0.5 * (b + np.copysign(root.real, b))
    return np.array([far / a, c / far], dtype=np.complex128)


def _apart(poles: ComplexArray) -> ComplexArray:
    """Move poles apart that are too near for partial fractions; conjugate symmetry is kept."""
    moved = poles.copy()
    for i in range(len(moved)):
        for j in range(i):
            size = abs(moved[i])
            if abs(moved[i] - moved[j]) < _APART * size:
                middle = 0.5 * (moved[i] + moved[j]).real
                moved[i], moved[j] = middle * (1 + _APART / 2), middle * (1 - _APART / 2)
    return moved
