"""Run the sampled law around the plants, step by step, many columns at once."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ...ident.bend import curved
from ...ident.run import FloatArray
from ..discretise import LawColumns
from .bank import Bank, IndexArray


@dataclass(frozen=True, eq=False)
class Clamps:
    """Bounds of each column in deviations from its own steady state before the step; +-inf is unbounded.

    Attributes
    ----------
    lowest, highest : (c,) arrays, command unit
    change : float, command unit
        Largest change from one sample to the next.
    """

    lowest: FloatArray
    highest: FloatArray
    change: float = np.inf

    @property
    def free(self) -> bool:
        """Whether nothing is bounded."""
        return bool(np.all(np.isinf(self.lowest)) and np.all(np.isinf(self.highest)) and np.isinf(self.change))


@dataclass(frozen=True, eq=False)
class History:
    """What c columns did over N samples, in deviations from their steady start.

    Attributes
    ----------
    response : (N * m, c) array
        At the sub-points; row i stands at time (i + 1) T/m.
    command : (N, c) array
        As sent.
    limited : (N, c) array of bool, or None
        Where the clamp acted; None when nothing is bounded.
    rate : (c,) array or None
        Largest slope of the response.
    """

    response: FloatArray
    command: FloatArray
    limited: NDArray[np.bool_] | None
    rate: FloatArray | None


def simulate(
    bank: Bank,
    which: IndexArray,
    law: LawColumns,
    *,
    setpoint: FloatArray,
    disturbance: FloatArray,
    clamps: Clamps,
    samples: int,
    rates: bool = False,
) -> History:
    """Response to a setpoint step and a command disturbance, both at the first sample, from rest.

    Parameters
    ----------
    bank : Bank
    which : (c,) array of int
        Plant of each column.
    law : LawColumns, c columns
    setpoint : (c,) array, response unit
        Step of the setpoint.
    disturbance : (c,) array, command unit
        Added to the command on its way to the plant.
    clamps : Clamps
    samples : int
    rates : bool
        Whether the slope of the response is wanted.

    Notes
    -----
    Bounds in level are first left out, and the columns that pass them run again: most never meet their clamp.
    """
    if clamps.free or np.isfinite(clamps.change):
        return _run(bank, which, law, setpoint, disturbance, clamps, samples, rates)
    free = _run(bank, which, law, setpoint, disturbance, _unbounded(which.size), samples, rates)
    with np.errstate(invalid="ignore"):
        inside = (free.command.max(axis=0) <= clamps.highest) & (free.command.min(axis=0) >= clamps.lowest)
    passed = np.flatnonzero(~inside)
    limited = np.zeros(free.command.shape, dtype=bool)
    if passed.size:
        bounds = Clamps(clamps.lowest[passed], clamps.highest[passed])
        part = _run(
            bank, which[passed], law.take(passed), setpoint[passed], disturbance[passed], bounds, samples, rates
        )
        free.response[:, passed], free.command[:, passed] = part.response, part.command
        limited[:, passed] = False if part.limited is None else part.limited
        if free.rate is not None and part.rate is not None:
            free.rate[passed] = part.rate
    return History(free.response, free.command, limited, free.rate)


def _unbounded(count: int) -> Clamps:
    return Clamps(np.full(count, -np.inf), np.full(count, np.inf))


def _run(
    bank: Bank,
    which: IndexArray,
    law: LawColumns,
    setpoint: FloatArray,
    disturbance: FloatArray,
    clamps: Clamps,
    samples: int,
    rates: bool,
) -> History:
    run = _Columns(bank, which, law, setpoint, clamps, samples)
    with np.errstate(over="ignore", invalid="ignore"):
        rate = run.go(disturbance, bank.rate[:, :, which] if rates else None)
    response = run.response.reshape(samples * bank.points, which.size)
    return History(response, run.command, run.limited, rate)


def followed(stem: FloatArray, command: FloatArray, band: FloatArray, short: FloatArray) -> FloatArray:
    """(c,) where valves that stood at `stem` stand under a new command, see `ident.play`."""
    gap = command - stem
    return np.where(np.abs(gap) > band, command - np.copysign(short, gap), stem)


class _Columns:
    """The working arrays of one simulation; the law runs in transposed form with two stored sums."""

    def __init__(
        self, bank: Bank, which: IndexArray, law: LawColumns, setpoint: FloatArray, clamps: Clamps, samples: int
    ) -> None:
        count = which.size
        self.points, self.states, self.samples = bank.points, bank.states, samples
        self.step = np.ascontiguousarray(bank.step[:, :, which])
        self.filtered = bank.filtered
        self.ahead = bank.seen[:, which] if bank.ahead else None
        self.valves = None if bank.valves is None else bank.valves[:, which]
        self.curves = None if bank.curves is None else bank.curves[:, which]
        self.straight = self.valves is None and self.curves is None
        self.stem = np.zeros(count)
        self.lag = bank.lag[which]
        self.law, self.clamps, self.free = law, clamps, clamps.free
        self.goal = law.setpoint * setpoint
        self.response = np.empty((samples, bank.points, count))
        self.command = np.empty((samples, count))
        self.limited = None if self.free else np.zeros((samples, count), dtype=bool)

    def go(self, disturbance: FloatArray, slopes: FloatArray | None) -> FloatArray | None:
        """Fill the histories; give the largest slope when the slope rows are handed in."""
        count, n, m = self.lag.size, self.states, self.points
        depth = int(self.lag.max()) if count else 0
        sent = np.zeros((self.samples + depth, count))
        flat = sent.reshape(-1)
        place = (depth - self.lag) * count + np.arange(count)
        matrix = self.step if slopes is None else np.concatenate([self.step, slopes])
        state, out = np.zeros((n + 2, count)), np.empty((matrix.shape[0], count))
        slope = out[m + n :]  # of each sub-point, where it is wanted
        steepest = np.zeros(slope.shape)
        first, second = np.zeros(count), np.zeros(count)
        before = np.zeros(count)
        y0, y1, y2 = self.law.response
        m1, m2 = self.law.memory[1:]
        g1, g2 = self.law.memory[1:] - self.law.command[1:]
        r0, r1, r2 = self.goal
        short = not (np.any(y2) or np.any(m2) or np.any(g2) or np.any(r2))
        seen_now = np.zeros(count)
        for k in range(self.samples):
            wanted = first + r0 - y0 * seen_now
            given = wanted if self.free else self._clamped(wanted, before, k)
            self.command[k] = given
            np.add(given if self.straight else self._through(given), disturbance, out=sent[k + depth])
            state[n] = state[n + 1]
            flat.take(place + k * count, out=state[n + 1])
            np.einsum("ijc,jc->ic", matrix, state, out=out)
            self.response[k] = out[:m]
            if slopes is not None:
                np.abs(slope, out=slope)
                np.maximum(steepest, slope, out=steepest)
            first = second + r1 - y1 * seen_now + g1 * given - m1 * wanted
            if not short:
                second = r2 - y2 * seen_now + g2 * given - m2 * wanted
            state[:n] = out[m : m + n]
            before = given
            if self.ahead is not None:
                seen_now = np.einsum("ic,ic->c", self.ahead[:n], state[:n]) + self.ahead[n] * state[n + 1]
            else:
                seen_now = state[n - 1].copy() if self.filtered else self.response[k, m - 1]
        return None if slopes is None else np.asarray(steepest.max(axis=0))

    def _through(self, given: FloatArray) -> FloatArray:
        """What drives the plants: behind their curves, and where the valves stand. Each stays until the command is its
        band away, then comes to rest short of it."""
        if self.curves is not None:
            given = curved(self.curves[0], given) / self.curves[1]
        if self.valves is None:
            return given
        band, short, above = self.valves
        self.stem = followed(self.stem, given + above, band, short)
        return self.stem

    def _clamped(self, wanted: FloatArray, before: FloatArray, k: int) -> FloatArray:
        low = np.maximum(self.clamps.lowest, before - self.clamps.change)
        high = np.minimum(self.clamps.highest, before + self.clamps.change)
        given = np.minimum(np.maximum(wanted, low), high)
        if self.limited is not None:
            np.not_equal(given, wanted, out=self.limited[k])
        return given
