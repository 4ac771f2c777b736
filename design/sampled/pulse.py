"""The plant as the sampled law meets it: its exact pulse transfer function, kept in powers of z - 1."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ...ident.plant import ComplexArray
from ...ident.run import FloatArray
from ..discretise import LawColumns
from .bank import Bank

_NEAR = 0.7  # half-width of a resonance's cluster of grid points, as a share of its frequency
_CREEP, _TAIL = 1e-5, 10  # a few points far below, for poles that creep out next to z = 1
_LINE = 25  # points in a cluster


@dataclass(frozen=True, eq=False)
class Pulse:
    """H(z) = z^-lag (fresh(z-1) + old(z-1)/z + through/z) of p plants, each a ratio of polynomials in z - 1.

    Powers of z - 1 keep the digits when the update interval is short against the plant.

    Attributes
    ----------
    fresh, old : (n, p) arrays
        Numerators, highest power first, degree n - 1.
    below : (n + 1, p) array
        Denominator, monic.
    through : (p,) array
    lag : (p,) array of int
    interval : float, s
    """

    fresh: FloatArray
    old: FloatArray
    below: FloatArray
    through: FloatArray
    lag: NDArray[np.int64]
    interval: float

    def at(self, z: ComplexArray, which: NDArray[np.int64]) -> ComplexArray:
        """H of plant which[i] at z[..., i]."""
        delta, back = z - 1.0, 1.0 / z
        top = _horner(self.fresh[:, which], delta) + back * _horner(self.old[:, which], delta)
        ratio = top / _horner(self.below[:, which], delta) + self.through[which] * back
        return np.asarray(ratio * np.exp(-self.lag[which] * np.log(z)), dtype=np.complex128)


def pulse_of(bank: Bank) -> Pulse:
    """Resolvent of the sampled plant by the recursion of Faddeev and Le Verrier, on transition - 1.

    References
    ----------
    Faddeev and Faddeeva, Computational Methods of Linear Algebra (from memory).
    """
    n, p = bank.states, bank.lag.size
    change = bank.transition - np.eye(n)[:, :, None]
    below = np.ones((n + 1, p))
    fresh, old = np.empty((n, p)), np.empty((n, p))
    adjugate = np.repeat(np.eye(n)[:, :, None], p, axis=2)
    for k in range(1, n + 1):
        fresh[k - 1] = np.einsum("ip,ijp,jp->p", bank.seen[:n], adjugate, bank.arrive_new)
        old[k - 1] = np.einsum("ip,ijp,jp->p", bank.seen[:n], adjugate, bank.arrive_old)
        moved = np.einsum("ijp,jkp->ikp", change, adjugate)
        below[k] = -np.einsum("iip->p", moved) / k
        adjugate = moved + np.eye(n)[:, :, None] * below[k]
    return Pulse(fresh, old, below, bank.seen[n], bank.lag, bank.interval)


def law_response(law: LawColumns, z: ComplexArray) -> ComplexArray:
    """From response to minus the command, S(z)/A(z), at (..., c) points."""
    return _in_back(law.response, z) / _in_back(law.command, z)


def setpoint_response(law: LawColumns, z: ComplexArray) -> ComplexArray:
    """From setpoint to command, R(z)/A(z), at (..., c) points."""
    return _in_back(law.setpoint, z) / _in_back(law.command, z)


def frequency_grid(bank: Bank, size: int, slow: float = np.inf) -> FloatArray:
    """(F, p) increasing angular frequencies in rad/s, up to half the sample rate.

    Spread evenly in the logarithm, and in phase as far as the dead time turns it, and gathered round each
    lightly damped plant pole.
    """
    low, turn = np.minimum(slow_edge(bank), slow), bank.delay + 0.5 * bank.interval
    tail = np.geomspace(_CREEP * low, low, _TAIL, endpoint=False)
    even = np.geomspace(low, np.pi / bank.interval, size)
    turned = np.arange(1, size // 2)[:, None] * (0.25 / turn)
    usual = np.concatenate([tail, even, turned]).T
    columns = [_plant_grid(bank, i, column) for i, column in enumerate(usual)]
    longest = max(column.size for column in columns)
    return np.array([_stretched(column, longest) for column in columns]).T


def slow_edge(bank: Bank) -> FloatArray:
    """(p,) angular frequency in rad/s under which a plant shows its integrators and static gain only."""
    sizes = np.where(np.abs(bank.poles) > 0.0, np.abs(bank.poles), np.inf)
    paces = np.minimum(sizes.min(axis=1, initial=np.inf), 1.0 / (bank.delay + 0.5 * bank.interval))
    return np.asarray(np.minimum(0.02 * paces, 1e-3 * np.pi / bank.interval))


def _plant_grid(bank: Bank, i: int, usual: FloatArray) -> FloatArray:
    """The frequencies that every plant gets, the lowest first, and those round this one's poles, in order."""
    top = np.pi / bank.interval
    poles = bank.poles[i][np.isfinite(bank.poles[i])]
    parts = [usual]
    for pole in poles[poles.imag > 0.5 * np.abs(poles.real)]:
        width = max(abs(pole.real), 1e-7 * abs(pole))
        reach = np.arcsinh(_NEAR * pole.imag / width)
        parts.append(pole.imag + width * np.sinh(np.linspace(-reach, reach, 2 * _LINE + 1)))
    grid = np.unique(np.concatenate(parts))
    return np.append(grid[(grid >= usual[0]) & (grid < top * (1 - 1e-9))], top)


def _stretched(column: FloatArray, longest: int) -> FloatArray:
    """Fill up by halving the first gaps, so that the grid stays increasing."""
    missing = longest - column.size
    if missing == 0:
        return column
    gaps = np.linspace(column[0], column[1], missing + 2)[1:-1]
    return np.concatenate([column[:1], gaps, column[1:]])


def _horner(coefficients: FloatArray, x: ComplexArray) -> ComplexArray:
    total = np.broadcast_to(coefficients[0], x.shape).astype(np.complex128)
    for row in coefficients[1:]:
        total = total * x + row
    return total


def _in_back(coefficients: FloatArray, z: ComplexArray) -> ComplexArray:
    back = 1.0 / z
    return np.asarray(coefficients[0] + back * (coefficients[1] + back * coefficients[2]), dtype=np.complex128)
