"""How a response moves with shapes and dead time: exact sensitivities from two recursions a mode.

A mode obeys x' = p x + u(t - L) and the response is the sum of r x. It moves with a parameter through its residues and
its poles, r' x + r p' dx/dp, and with the dead time by -r x'. dx/dp runs through the same recursion as x, driven by x.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from scipy.signal import lfilter

from .catalogue.structure import Polynomials
from .modes import Modes, value_at
from .run import FloatArray
from .simulate import Grid, delayed_command, delayed_drive, delayed_parts, mode_state, mode_weights

# Poles nearer than this (relative) move without bound when they part: their shapes get differences instead.
_NEAR = 3e-2
# Step of the difference of a mode's three weights over pole times interval, and of coefficients over a log shape.
_STEP = 1e-4
_SHAPE_STEP = 1e-5


@dataclass(frozen=True)
class ModeSlopes:
    """Derivatives of poles, (s, m), residues, (s, m), and direct term, (s,), in each log shape."""

    poles: np.ndarray
    residues: np.ndarray
    direct: FloatArray


def mode_slopes(
    modes: Modes, before: Sequence[Polynomials], at: Polynomials, after: Sequence[Polynomials]
) -> ModeSlopes | None:
    """Slopes of the modes of N/D, from N and D just before, just after and at the shapes; None where poles nearly meet.

    From D(p) = 0 and r = N(p)/D'(p), a dot for the derivative in a log shape:

        p. = -D.(p)/D'(p),    r. = (N.(p) + N'(p) p. - r (D.'(p) + D''(p) p.))/D'(p)
    """
    if modes.double or not _parted(modes):
        return None
    top, below = at
    slope, bend, top_slope = _derived(below), _derived(_derived(below)), _derived(top)
    poles, residues, direct = [], [], []
    for (top_low, low), (top_high, high) in zip(before, after, strict=True):
        below_dot = [(b - a) / (2 * _SHAPE_STEP) for a, b in zip(low, high, strict=True)]
        top_dot = [(b - a) / (2 * _SHAPE_STEP) for a, b in zip(top_low, top_high, strict=True)]
        row_p, row_r = [], []
        for pole, residue in zip(modes.poles.tolist(), modes.residues.tolist(), strict=True):
            twice = 2.0 if pole.imag > 0 else 1.0
            steep = value_at(slope, pole)
            moves = -value_at(below_dot, pole) / steep if pole else 0j
            lost = value_at(_derived(below_dot), pole) + value_at(bend, pole) * moves
            row_p.append(moves)
            gained = twice * (value_at(top_dot, pole) + value_at(top_slope, pole) * moves)
            row_r.append((gained - residue * lost) / steep)
        poles.append(row_p)
        residues.append(row_r)
        direct.append((top_dot[0] - modes.direct * below_dot[0]) / below[0] if modes.direct else 0.0)
    size = (len(direct), len(modes.poles))
    return ModeSlopes(
        np.array(poles, complex).reshape(size), np.array(residues, complex).reshape(size), np.array(direct, float)
    )


def log_shape_neighbours(shape: tuple[float, ...]) -> tuple[list[tuple[float, ...]], list[tuple[float, ...]]]:
    """The shapes a small step below and above, each in one log shape."""
    factor = float(np.exp(_SHAPE_STEP))

    def moved(i: int, by: float) -> tuple[float, ...]:
        return tuple(value * by if j == i else value for j, value in enumerate(shape))

    count = range(len(shape))
    return [moved(i, 1 / factor) for i in count], [moved(i, factor) for i in count]


def _derived(coefficients: Sequence[float]) -> list[float]:
    order = len(coefficients) - 1
    return [c * (order - i) for i, c in enumerate(coefficients[:-1])] or [0.0]


def _parted(modes: Modes) -> bool:
    """Whether all poles, the conjugates too, are well apart."""
    poles = [*modes.poles.tolist(), *(p.conjugate() for p in modes.poles.tolist() if p.imag)]
    return all(abs(p - q) > _NEAR * abs(p) for i, p in enumerate(poles) for q in poles[:i] if p)


@dataclass(frozen=True, eq=False)
class Moving:
    """The zero-state response of modes on an even grid with what its slopes need.

    Attributes
    ----------
    modes : Modes
        Without two integrators.
    grid : Grid
        Even.
    dead_time : float, s
    """

    modes: Modes
    grid: Grid
    dead_time: float

    @property
    def _delay(self) -> float:
        return self.dead_time + self.grid.late

    @cached_property
    def states(self) -> list[np.ndarray]:
        """One (n,) state a mode, of unit residue."""
        return [mode_state(pole, self.grid, self._delay) for pole in self.modes.poles.tolist()]

    @cached_property
    def response(self) -> FloatArray:
        """(n,)"""
        total = np.zeros(len(self.grid.time))
        for residue, state in zip(self.modes.residues.tolist(), self.states, strict=True):
            total += residue.real * state.real
            if residue.imag:
                total -= residue.imag * state.imag
        return total + self.modes.direct * delayed_command(self.grid, self._delay) if self.modes.direct else total

    @cached_property
    def _arriving(self) -> FloatArray:
        """(n,) the command at each sample less the dead time; a jump at that very instant has not arrived."""
        now, before, share = delayed_parts(self.grid, self._delay)
        return now + share * (before - now) if self.grid.interpolated else before

    def slopes(self, of_modes: ModeSlopes) -> FloatArray:
        """(n, s + 1) derivatives in each log shape and in the dead time, s."""
        shapes = len(of_modes.poles)
        out = np.zeros((len(self.grid.time), shapes + 1))
        for i, (pole, residue) in enumerate(zip(self.modes.poles.tolist(), self.modes.residues.tolist(), strict=True)):
            state = self.states[i]
            by_pole = self._by_pole(pole, state) if np.any(of_modes.poles[:, i]) else None
            for k in range(shapes):
                out[:, k] += (of_modes.residues[k, i] * state).real
                if by_pole is not None:
                    out[:, k] += (residue * of_modes.poles[k, i] * by_pole).real
            out[:, -1] -= (residue * (pole * state + self._arriving)).real
        for k in range(shapes):
            if of_modes.direct[k]:
                out[:, k] += of_modes.direct[k] * delayed_command(self.grid, self._delay)
        return out

    def _by_pole(self, pole: complex, state: np.ndarray) -> np.ndarray:
        """dx/dp, (n,): x[k+1] = g x[k] + d[k] differentiated, the weights in d by a central difference."""
        step = self.grid.interval
        assert step is not None
        h = _STEP / step
        low, high = (mode_weights(pole + by, self.grid, self._delay) for by in (-h, h))
        weights = tuple((b - a) / (2 * h) for a, b in zip(low, high, strict=True))
        growth = np.exp(pole * step)
        drive = step * growth * state + delayed_drive(weights, self.grid, self._delay)
        if pole.imag == 0.0:
            return np.asarray(lfilter([0.0, 1.0], [1.0, -growth.real], drive.real))
        return np.asarray(lfilter([0.0, 1.0], [1.0, -growth], drive))
