"""One point of a fit: the columns there, the best linear part, and how the model moves about it."""

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np

from .catalogue.structure import Polynomials
from .modes import Modes, modes_of
from .run import FloatArray
from .slopes import ModeSlopes, Moving, log_shape_neighbours, mode_slopes
from .whiten import Colour

if TYPE_CHECKING:
    from .regression import Regression


@dataclass(frozen=True, eq=False)
class Local:
    """The unwhitened model about theta.

    Attributes
    ----------
    problem : Regression
    theta : (s + 1,) array
        Log shapes and dead time, s.

    Notes
    -----
    On even grids the slopes are exact and share their recursions with the columns; with friction, on uneven grids,
    behind two integrators and where two poles meet they are differences.
    """

    problem: "Regression"
    theta: FloatArray

    @cached_property
    def moving(self) -> FloatArray:
        """(n, 1 + k) columns that change with the shapes, as `Regression.moving_columns` has them."""
        problem = self.problem
        if not self._exact:
            return problem.moving_columns(*self._split)
        columns = [self._stacked([part.response + problem.bias_response(i) for i, part in enumerate(self._unit)])]
        if self._zero:
            columns.append(self._stacked([part.response for part in self._zero]))
        initial = problem.initial_columns(self._split[0])
        return np.column_stack(columns if initial is None else [*columns, initial])

    @property
    def columns(self) -> FloatArray:
        """(n, q) columns that the coefficients weigh, in their order."""
        return np.column_stack([self.moving[:, :1], self.problem.fixed_columns, self.moving[:, 1:]])

    def slopes(self, coefficients: FloatArray, *, rough: bool = False) -> FloatArray:
        """(n, s + 1) derivatives of the model in the log shapes and the dead time.

        Where they are differences, `rough` takes one-sided ones.
        """
        ways = self._of_modes
        if not self._exact or ways is None:
            return self._differences(coefficients, rough)
        problem = self.problem
        q = problem.fixed_columns.shape[1]
        out = np.zeros((len(problem.measured), len(self.theta)))
        for i, (run, part) in enumerate(zip(problem.runs, problem.parts, strict=True)):
            out[part] = coefficients[0] * self._unit[i].slopes(ways[0])[run.valid]
            if self._zero:
                out[part] += coefficients[1 + q] * self._zero[i].slopes(ways[1])[run.valid]
        self._add_initial(out, coefficients[1 + q + len(ways) - 1 :], ways[0])
        if problem.jumps:
            # between two samples the dead time does nothing that the linear part could not
            out[:, -1] = 0.0
        return out

    def moving_under(self, colour: Colour) -> FloatArray:
        """(n', 1 + k) moving columns whitened."""
        return self.problem.whitener(colour).apply(self.moving)

    def columns_under(self, colour: Colour) -> FloatArray:
        """(n', q) columns whitened, in their order."""
        moving, fixed = self.moving_under(colour), self.problem.fixed_under(colour)
        return np.column_stack([moving[:, :1], fixed, moving[:, 1:]])

    def slopes_under(self, coefficients: FloatArray, colour: Colour, *, rough: bool = False) -> FloatArray:
        """(n', s + 1) slopes whitened."""
        return self.problem.whitener(colour).apply(self.slopes(coefficients, rough=rough))

    def _add_initial(self, out: FloatArray, coefficients: FloatArray, ways: ModeSlopes) -> None:
        problem, at = self.problem, 0
        modes = problem.modes(self._split[0])
        for run, grid, part, free in zip(problem.runs, problem.grids, problem.parts, problem.unsettled, strict=True):
            for i, pole in enumerate(modes.poles.tolist()) if free else ():
                if pole == 0:
                    continue
                time = grid.time[run.valid]
                grows = time * np.exp(pole * time)
                for piece in (1.0, -1j) if pole.imag else (1.0,):
                    for k in range(len(ways.poles)):
                        out[part, k] += coefficients[at] * (piece * ways.poles[k, i] * grows).real
                    at += 1

    def _differences(self, coefficients: FloatArray, rough: bool) -> FloatArray:
        problem, out = self.problem, np.zeros((len(self.problem.measured), len(self.theta)))
        here = self.columns @ coefficients if rough else None
        for i, step in enumerate(problem.steps(self.theta)):
            if i == len(self.theta) - 1 and problem.jumps:
                continue
            high = problem.columns(self.theta + step) @ coefficients
            low = self.theta - step
            low[-1] = max(low[-1], problem.earliest)
            if here is not None:
                out[:, i] = (high - here) / step[i]
            else:
                out[:, i] = (high - problem.columns(low) @ coefficients) / np.sum(self.theta + step - low)
        return out

    def _stacked(self, whole: list[FloatArray]) -> FloatArray:
        return np.concatenate([part[run.valid] for part, run in zip(whole, self.problem.runs, strict=True)])

    @cached_property
    def _split(self) -> tuple[tuple[float, ...], float]:
        return self.problem.split(self.theta)

    @property
    def _exact(self) -> bool:
        return self.problem.exact_slopes

    @cached_property
    def _unit(self) -> list[Moving]:
        return self._moving(self._formula)

    @cached_property
    def _zero(self) -> list[Moving]:
        return self._moving(_times_s(self._formula)) if self.problem.structure.zero else []

    @property
    def _formula(self) -> Polynomials:
        return self.problem.structure.polynomials(self._split[0])

    def _moving(self, formula: Polynomials) -> list[Moving]:
        modes = modes_of(*formula)
        return [Moving(modes, grid, self._split[1]) for grid in self.problem.grids]

    @cached_property
    def _of_modes(self) -> tuple[ModeSlopes, ...] | None:
        """Slopes of the modes of the structure, and of its slope where there is a zero."""
        formula = self.problem.structure.polynomials
        low, high = ([formula(shape) for shape in side] for side in log_shape_neighbours(self._split[0]))
        unit = mode_slopes(self._modes(self._formula), low, self._formula, high)
        if unit is None or not self.problem.structure.zero:
            return None if unit is None else (unit,)
        low, high = [_times_s(f) for f in low], [_times_s(f) for f in high]
        at = _times_s(self._formula)
        zero = mode_slopes(self._modes(at), low, at, high)
        return None if zero is None else (unit, zero)

    def _modes(self, formula: Polynomials) -> Modes:
        return modes_of(*formula)


def _times_s(formula: Polynomials) -> Polynomials:
    numerator, denominator = formula
    return (*numerator, 0.0), denominator
