"""Stability, margins and peak sensitivity of the exact sampled loop, for many plants and laws at once."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ...ident.fitted import Noise
from ...ident.plant import ComplexArray
from ...ident.run import FloatArray
from ..discretise import LawColumns
from .bank import Bank, IndexArray
from .pulse import Pulse, frequency_grid, law_response, pulse_of, slow_edge

_ARC = 7  # points on the small arc round z = 1
_TURN = 1.2  # rad; a larger step of the angle of 1 + L is looked at more closely
_FAR = 0.7  # below this size of L the angle of 1 + L cannot have slipped by a turn


LoopAt = Callable[[ComplexArray, IndexArray], ComplexArray]


@dataclass(frozen=True, eq=False)
class Spectra:
    """What a bank of plants looks like on its frequency grid, ready for any law.

    Attributes
    ----------
    pulse : Pulse
    frequency : (F, p) array, rad/s
    z : (_ARC + F, p) complex array
        An arc round z = 1 (outside the unit circle), then the upper half of the circle.
    plant : (_ARC + F, p) complex array
        H(z) there.
    unstable : (p,) array of int
    slow : (p,) array, rad/s
        Below it a plant shows its integrators and static gain only.
    """

    pulse: Pulse
    frequency: FloatArray
    z: ComplexArray
    plant: ComplexArray
    unstable: IndexArray
    slow: FloatArray

    @property
    def interval(self) -> float:
        """Update interval, s."""
        return self.pulse.interval


@dataclass(frozen=True, eq=False)
class Margins:
    """(c,) arrays; only meaningful where stable.

    Attributes
    ----------
    stable : array of bool
    gain : array, dB
        Size of the nearest change of gain, up or down, that makes the loop unstable.
    phase : array, deg
        Least angle from -180 deg over all gain crossings, either way.
    sensitivity : array
        Largest |1/(1 + L)|.
    upper : array
        Least factor above one that makes the loop unstable; inf where there is none.
    lower : array
        Largest factor below one that does; 0 where there is none.
    """

    stable: NDArray[np.bool_]
    gain: FloatArray
    phase: FloatArray
    sensitivity: FloatArray
    upper: FloatArray
    lower: FloatArray


def spectra_of(bank: Bank, size: int = 160, slow: float = np.inf) -> Spectra:
    """Evaluate the plants once on a grid that resolves resonances and dead time, from `slow` (rad/s) on at least."""
    pulse, frequency = pulse_of(bank), frequency_grid(bank, size, slow)
    radius = frequency[0] * bank.interval
    arc = 1.0 + radius * np.exp(1j * np.linspace(0.0, 0.5 * np.pi, _ARC)[:, None])
    z = np.concatenate([arc, np.exp(1j * frequency * bank.interval)])
    z[-1] = -1.0
    return Spectra(
        pulse, frequency, z, pulse.at(z, np.arange(bank.lag.size)), bank.unstable, np.minimum(slow_edge(bank), slow)
    )


def open_loop_at(spectra: Spectra, which: IndexArray, law: LawColumns) -> LoopAt:
    """L(z) of chosen columns at any points: the exact function behind the grid."""

    def at(z: ComplexArray, columns: IndexArray) -> ComplexArray:
        return spectra.pulse.at(z, which[columns]) * law_response(law.take(columns), z)

    return at


def margins_of(spectra: Spectra, which: IndexArray, law: LawColumns, *, exact: bool = True) -> Margins:
    """Stability by Nyquist's count, and every margin over all crossings.

    Parameters
    ----------
    which : (c,) array of int
        Plant of each column.
    exact : bool
        Refine every crossing and the sensitivity peak on the exact loop; else interpolate on the grid.
    """
    z = spectra.z[:, which]
    with np.errstate(all="ignore"):
        loop = spectra.plant[:, which] * law_response(law, z)
        at = open_loop_at(spectra, which, law)
        stable = _stable(at, z, loop, spectra.unstable[which])
        upper, lower = _factors(at, z, loop, exact)
        phase = _phase_margin(at, z, loop, exact)
        sensitivity = _peak(at, z, loop, exact)
        gain = np.minimum(20.0 * np.log10(upper), -20.0 * np.log10(lower))
    return Margins(stable, gain, phase, sensitivity, upper, lower)


def _stable(at: LoopAt, z: ComplexArray, loop: ComplexArray, unstable: IndexArray) -> NDArray[np.bool_]:
    """Zeros of 1 + L outside the circle = open-loop ones - turns of 1 + L (Nyquist)."""
    turns = np.angle((1.0 + loop[1:]) / (1.0 + loop[:-1]))
    large = np.maximum(np.abs(loop[1:]), np.abs(loop[:-1])) > _FAR
    row, column = np.nonzero((np.abs(turns) > _TURN) & large)
    total = turns.sum(axis=0)
    if row.size:
        better = _angle_between(at, z[row, column], z[row + 1, column], column)
        np.add.at(total, column, better - turns[row, column])
    outside = unstable - np.round(total / np.pi)
    finite = np.all(np.isfinite(loop), axis=0)
    return np.asarray(finite & (outside == 0))


def _angle_between(at: LoopAt, left: ComplexArray, right: ComplexArray, column: IndexArray) -> FloatArray:
    """Angle of 1 + L from left to right, by halving each step in the logarithm of z until every turn is small."""
    pieces = 8
    share = np.linspace(0.0, 1.0, pieces + 1)[:, None]
    for _ in range(4):
        points = left * np.exp(share * np.log(right / left))
        values = 1.0 + at(points, column)
        turns = np.angle(values[1:] / values[:-1])
        if pieces >= 64 or np.all(np.abs(turns) < _TURN):
            break
        pieces *= 2
        share = np.linspace(0.0, 1.0, pieces + 1)[:, None]
    return np.asarray(turns.sum(axis=0))


def _factors(at: LoopAt, z: ComplexArray, loop: ComplexArray, exact: bool) -> tuple[FloatArray, FloatArray]:
    """Gain factors at which the loop meets -1: the least above one and the largest below."""
    owner, factor = _meetings(at, z, loop, exact)
    upper, lower = np.full(loop.shape[1], np.inf), np.zeros(loop.shape[1])
    above = factor >= 1.0
    np.minimum.at(upper, owner[above], factor[above])
    below = factor < 1.0
    np.maximum.at(lower, owner[below], factor[below])
    return upper, lower


def _meetings(at: LoopAt, z: ComplexArray, loop: ComplexArray, exact: bool) -> tuple[IndexArray, FloatArray]:
    """Column and gain factor of every place at which the loop meets -1; NaN where an end lies on the positive side."""
    imag, real = loop.imag, loop.real
    crosses = (imag[1:] * imag[:-1] < 0.0) & ((real[1:] < 0.0) | (real[:-1] < 0.0))
    row, column = np.nonzero(crosses)
    value = _crossing(at, z, loop, row, column, exact, lambda x: x.imag).real
    every = np.arange(loop.shape[1])
    ends = np.concatenate([value, loop[0].real, loop[-1].real])
    owner = np.concatenate([column, every, every])
    return owner, np.where(ends < 0.0, -1.0 / np.minimum(ends, -1e-300), np.nan)


def stable_factors(spectra: Spectra, which: IndexArray, law: LawColumns) -> tuple[FloatArray, FloatArray]:
    """(c,) ends of the widest range of factors on the gain, by ratio, in which each loop is stable; NaN where none is.

    A range that reaches down to nothing begins at 0, one without an upper end ends at infinity.
    """
    z = spectra.z[:, which]
    with np.errstate(all="ignore"):
        loop = spectra.plant[:, which] * law_response(law, z)
        owner, factor = _meetings(open_loop_at(spectra, which, law), z, loop, exact=False)
    ends = [np.unique(factor[(owner == i) & (factor > 0.0)]) for i in range(which.size)]
    inner = [np.sqrt(np.append(e[:1] / 1e4, e) * np.append(e, e[-1:] * 1e4)) if e.size else np.ones(1) for e in ends]
    columns = np.repeat(np.arange(which.size), [i.size for i in inner])
    tried = law.take(columns)
    scaled = LawColumns(tried.command, tried.setpoint, tried.response * np.concatenate(inner), tried.memory)
    stable = margins_of(spectra, which[columns], scaled, exact=False).stable
    low, high = np.full(which.size, np.nan), np.full(which.size, np.nan)
    for i, edges in enumerate(ends):
        good = np.flatnonzero(stable[columns == i])
        if not good.size:
            continue
        bounds = np.concatenate([[0.0], edges, [np.inf]])
        width = np.log(np.minimum(bounds[good + 1], 1e18)) - np.log(np.maximum(bounds[good], 1e-18))
        best = good[int(width.argmax())]
        low[i], high[i] = bounds[best], bounds[best + 1]
    return low, high


def _phase_margin(at: LoopAt, z: ComplexArray, loop: ComplexArray, exact: bool) -> FloatArray:
    size = np.log(np.abs(loop[_ARC:]))
    row, column = np.nonzero(size[1:] * size[:-1] < 0.0)
    value = _crossing(at, z, loop, row + _ARC, column, exact, lambda x: np.log(np.abs(x)))
    margin = np.full(loop.shape[1], 180.0)
    np.minimum.at(margin, column, np.abs(np.degrees(np.angle(-value))))
    return margin


def _crossing(
    at: LoopAt,
    z: ComplexArray,
    loop: ComplexArray,
    row: IndexArray,
    column: IndexArray,
    exact: bool,
    measure: Callable[[ComplexArray], FloatArray],
) -> ComplexArray:
    """L where `measure` of it changes sign between grid rows, by regula falsi (Illinois) along the contour."""
    left, span = z[row, column], np.log(z[row + 1, column] / z[row, column])
    a, b = np.zeros(row.size), np.ones(row.size)
    fa, fb = measure(loop[row, column]), measure(loop[row + 1, column])
    if not exact:
        share = fa / (fa - fb)
        return np.asarray(loop[row, column] * (loop[row + 1, column] / loop[row, column]) ** share)
    value = loop[row, column]
    for _ in range(12 if row.size else 0):
        share = np.clip((a * fb - b * fa) / (fb - fa), 0.0, 1.0)
        share = np.where(np.isfinite(share), share, 0.5 * (a + b))
        value = at(left * np.exp(share * span), column)
        f = measure(value)
        same = f * fb > 0.0
        a, fa = np.where(same, a, b), np.where(same, 0.5 * fa, fb)
        b, fb = share, f
        if np.all(np.abs(f) <= 1e-13 * np.abs(value)):
            break
    return np.asarray(value)


def _peak(at: LoopAt, z: ComplexArray, loop: ComplexArray, exact: bool) -> FloatArray:
    """Largest |1/(1 + L)|, looked at closely round the grid's largest."""
    size = 1.0 / np.abs(1.0 + loop[_ARC:])
    size = np.where(np.isfinite(size), size, 0.0)
    best = size.max(axis=0)
    if not exact:
        return np.asarray(best)
    columns = np.arange(loop.shape[1])
    middle = np.clip(size.argmax(axis=0) + _ARC, _ARC + 1, z.shape[0] - 2)
    left, right = z[middle - 1, columns], z[middle + 1, columns]
    for _ in range(3):
        points = left * np.exp(np.linspace(0.0, 1.0, 9)[:, None] * np.log(right / left))
        close = 1.0 / np.abs(1.0 + at(points, columns))
        spot = np.clip(close.argmax(axis=0), 1, 7)
        left, right = points[spot - 1, columns], points[spot + 1, columns]
        best = np.maximum(best, close.max(axis=0))
    return np.asarray(best)


def command_noise(spectra: Spectra, which: IndexArray, law: LawColumns, noise: Noise, filter_time: float) -> FloatArray:
    """(c,) standard deviation of the command, command unit, that measurement noise causes through the loop."""
    z = spectra.z[_ARC:, which]
    angle = spectra.frequency[:, which] * spectra.interval
    with np.errstate(all="ignore"):
        law_part = law_response(law, z)
        passed = law_part / (1.0 + spectra.plant[_ARC:, which] * law_part)
        if filter_time > 0.0:
            keep = np.exp(-spectra.interval / filter_time)
            passed = passed * (1.0 - keep) / (1.0 - keep / z)
        density = np.abs(passed) ** 2 * noise_density(noise, spectra.interval, angle)
        area = np.sum(0.5 * (density[1:] + density[:-1]) * np.diff(angle, axis=0), axis=0)
        area += density[0] * angle[0]
    return np.asarray(np.sqrt(area / np.pi))


def noise_density(noise: Noise, interval: float, angle: FloatArray) -> FloatArray:
    """Spectral density of the noise sampled at `interval`, at angles in rad; its mean over 0..pi is the variance.

    At the interval of its record it is that of the ARMA(1, 1) process. At another one, r times as long, the covariance
    is carried over: (1 + rho c)(rho + c)/(1 + 2 rho c + c^2) rho^(k r - 1) of the variance k samples apart. A shorter
    one can show less colour than that where c > 0, never more than the whole variance.
    """
    rho, c, total = noise.rho, noise.c, noise.std**2
    below, ratio = 1.0 + 2.0 * rho * c + c * c, interval / noise.interval
    if not below > 0.0:
        return np.full_like(angle, total)
    if abs(ratio - 1.0) < 1e-9:
        z = np.exp(-1j * angle)
        return np.asarray(total * (1.0 - rho * rho) / below * np.abs((1.0 + c * z) / (1.0 - rho * z)) ** 2)
    coloured = total * (1.0 + rho * c) * (rho + c) / (below * rho) if rho > 0.0 else 0.0
    coloured = coloured if ratio > 1.0 else float(np.clip(coloured, 0.0, total))
    keep = rho**ratio if coloured else 0.0
    shape = (1.0 - keep * keep) / (1.0 - 2.0 * keep * np.cos(angle) + keep * keep)
    return np.asarray(np.maximum(total - coloured + coloured * shape, 0.0))
