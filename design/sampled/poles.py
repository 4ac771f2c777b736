"""Closed-loop poles of the exact sampled loop, and how much each pair shows in the response."""

from dataclasses import dataclass

import numpy as np

from ...ident.plant import ComplexArray
from ...ident.run import FloatArray
from ..discretise import LawColumns
from .bank import Bank, IndexArray
from .frequency import Spectra
from .pulse import law_response, setpoint_response

SHARE = 0.02  # a pole pair counts when its share of the response exceeds this


@dataclass(frozen=True, eq=False)
class Poles:
    """Poles of c loops as ln z / T.

    Attributes
    ----------
    s : (q, c) complex array, 1/s
        NaN where a start did not reach a pole.
    share : (q, c) array
        Larger of the shares in the response to a setpoint step and to a command disturbance, at twice the total delay.
    """

    s: ComplexArray
    share: FloatArray

    @property
    def damping(self) -> FloatArray:
        """(c,) least damping ratio of the pairs that count; 1 where none does."""
        with np.errstate(invalid="ignore", divide="ignore"):
            ratio = -self.s.real / np.abs(self.s)
        counts = (np.abs(self.s.imag) > 1e-9 * np.abs(self.s)) & (self.share > SHARE)
        return np.asarray(np.where(counts, ratio, 1.0).min(axis=0))

    def dominant(self, column: int) -> complex:
        """The slowest pole whose share counts; of a pair the upper one."""
        s, share = self.s[:, column], self.share[:, column]
        known = np.isfinite(s)
        counted = known & (share > SHARE)
        chosen = counted if counted.any() else known
        order = np.where(chosen, s.real, -np.inf)
        best = complex(s[int(order.argmax())])
        return complex(best.real, abs(best.imag))


def poles_of(spectra: Spectra, which: IndexArray, law: LawColumns, starts: ComplexArray, delay: FloatArray) -> Poles:
    """Polish starting poles on the exact loop by Newton's method and weigh them by their residues.

    Parameters
    ----------
    starts : (q, c) complex array, 1/s
    delay : (c,) array, s
        Total delay of each column.
    """
    columns = np.broadcast_to(np.arange(which.size), starts.shape)
    interval = spectra.interval

    def loop(s: ComplexArray) -> ComplexArray:
        z = np.exp(s * interval)
        return np.asarray(spectra.pulse.at(z, which) * law_response(law, z), dtype=np.complex128)

    with np.errstate(all="ignore"):
        s = starts.astype(np.complex128)
        for _ in range(25):
            value, slope = _with_slope(loop, s)
            move = (1.0 + value) / slope
            move = move * np.minimum(1.0, 0.3 * np.maximum(np.abs(s), 0.1 / interval) / np.abs(move))
            s = s - move
        value, slope = _with_slope(loop, s)
        good = np.abs(1.0 + value) < 1e-6 * (1.0 + np.abs(slope * s))
        s = np.where(good & (columns >= 0), s, np.nan)
        share = _shares(spectra, which, law, s, slope, delay)
    return Poles(s, np.where(np.isfinite(share), share, 0.0))


def starting_poles(bank: Bank, which: IndexArray, law: LawColumns) -> ComplexArray:
    """Eigenvalues of the closed loop around `bank`, as ln z / T; (q, c)."""
    matrices = np.array([_closed(bank, int(which[i]), law, i, int(bank.lag.max())) for i in range(which.size)])
    z = np.linalg.eigvals(matrices)
    with np.errstate(divide="ignore", invalid="ignore"):
        s = np.log(z.astype(np.complex128)) / bank.interval
    return np.where(np.isfinite(s), s, -10.0 / bank.interval).T


def _closed(bank: Bank, plant: int, law: LawColumns, column: int, depth: int) -> FloatArray:
    """One step of [x, u[k-1] ... u[k-depth-1], two stored sums of the law]."""
    n, d = bank.states, int(bank.lag[plant])
    size = n + depth + 3
    matrix = np.zeros((size, size))
    seen = np.zeros(size)
    seen[:n], seen[n + d] = bank.seen[:n, plant], bank.seen[n, plant]
    sent = -law.response[0, column] * seen
    sent[n + depth + 1] += 1.0
    matrix[:n, :n] = bank.transition[:, :, plant]
    matrix[:n, n + d] += bank.arrive_old[:, plant]
    if d == 0:
        matrix[:n] += np.outer(bank.arrive_new[:, plant], sent)
    else:
        matrix[:n, n + d - 1] += bank.arrive_new[:, plant]
    matrix[n] = sent
    matrix[np.arange(n + 1, n + depth + 1), np.arange(n, n + depth)] = 1.0
    for i in (1, 2):
        row = n + depth + i
        matrix[row] = -law.response[i, column] * seen - law.command[i, column] * sent
    matrix[n + depth + 1, n + depth + 2] += 1.0
    return matrix


def _with_slope(loop: object, s: ComplexArray) -> tuple[ComplexArray, ComplexArray]:
    step = 1e-6 * np.maximum(np.abs(s), 1e-9)
    value = loop(s)  # type: ignore[operator]
    slope = (loop(s + step) - loop(s - step)) / (2.0 * step)  # type: ignore[operator]
    return value, slope


def _shares(
    spectra: Spectra, which: IndexArray, law: LawColumns, s: ComplexArray, slope: ComplexArray, delay: FloatArray
) -> FloatArray:
    """2 |residue| exp(Re(p) t): of the setpoint step in its final value, of the disturbance in its peak."""
    interval = spectra.interval
    z = np.exp(s * interval)
    plant = spectra.pulse.at(z, which)
    below = slope / (interval * z) * (z - 1.0)
    step = setpoint_response(law, z) * plant / below
    near = np.exp(1e-4 * spectra.slow * interval)[None, which].astype(np.complex128)
    reach = spectra.pulse.at(near, which)
    final = setpoint_response(law, near) * reach / (1.0 + law_response(law, near) * reach)
    fade = np.exp(s.real * 2.0 * delay)
    pushed = plant / below
    fastest = np.nanmax(np.abs(np.where(_main(s, pushed), s, np.nan)), axis=0)
    times = delay + np.geomspace(0.02, 8.0, 40)[:, None] / fastest
    waves = np.nansum(pushed * np.exp(s * times[:, None, :]), axis=1)
    rest = (reach / (1.0 + law_response(law, near) * reach))[0]
    largest = np.abs(waves + rest).max(axis=0)
    return np.asarray(np.maximum(2.0 * np.abs(step) * fade / np.abs(final[0]), 2.0 * np.abs(pushed) * fade / largest))


def _main(s: ComplexArray, residue: ComplexArray) -> np.ndarray:
    size = np.abs(residue)
    return np.asarray(np.isfinite(s) & (size >= 0.1 * np.nanmax(size, axis=0)))
