"""One point of a condensed fit: the model read off where rows stand for the samples."""

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np

from .local import Local
from .run import FloatArray
from .whiten import WHITE, Colour

if TYPE_CHECKING:
    from .condensed import Condensed


@dataclass(frozen=True, eq=False)
class Rows:
    """Where columns are read off, in samples of each run, and how much each place weighs."""

    at: tuple[FloatArray, ...]
    weight: tuple[FloatArray, ...]


@dataclass(frozen=True, eq=False)
class CondensedLocal(Local):
    """The model about theta; under a colour it is read off in closed form, and its slopes are differences of that."""

    problem: "Condensed"

    def moving_under(self, colour: Colour) -> FloatArray:
        """(r, 1 + k) moving columns under a colour."""
        problem = self.problem
        return problem.whitener(colour).cleared(problem.moving_in(problem.rows_under(colour), self.theta, colour))

    def slopes_under(self, coefficients: FloatArray, colour: Colour, *, rough: bool = False) -> FloatArray:
        """(r, s + 1) slopes under a colour."""
        problem = self.problem
        return problem.whitener(colour).cleared(
            self.slopes_in(problem.rows_under(colour), coefficients, colour, rough=rough)
        )

    def slopes_in(self, rows: Rows, coefficients: FloatArray, colour: Colour, *, rough: bool = False) -> FloatArray:
        """(r + 1, s + 1) differences of the model read off."""
        problem = self.problem
        first = 1 + problem.fixed_count
        moving = np.concatenate([coefficients[:1], coefficients[first:]])

        def model(theta: FloatArray) -> FloatArray:
            return np.asarray(problem.moving_in(rows, theta, colour) @ moving)

        here = model(self.theta) if rough or problem.jumps else None
        columns = []
        for i, step in enumerate(problem.steps(self.theta)):
            if i == len(self.theta) - 1 and here is not None and problem.jumps:
                columns.append(np.zeros(len(here)))
            elif rough and here is not None:
                columns.append((model(self.theta + step) - here) / step[i])
            else:
                low = self.theta - step
                low[-1] = max(low[-1], 0.0)
                columns.append((model(self.theta + step) - model(low)) / np.sum(self.theta + step - low))
        return np.column_stack(columns)


@dataclass(frozen=True, eq=False)
class RowsSeen:
    """`noise.Seen` of rows: every sample of the response counts, the model is read off in closed form."""

    problem: "Condensed"
    here: CondensedLocal
    coefficients: FloatArray

    @property
    def stretches(self) -> list[slice]:
        """Consecutive samples."""
        return self.problem.stretches

    @property
    def count(self) -> int:
        """How many samples there are."""
        return len(self.problem.measured)

    @cached_property
    def _scale(self) -> FloatArray:
        columns = self._columns(WHITE)
        return np.asarray(np.maximum(np.sqrt(np.einsum("ij,ij->j", columns, columns)), 1e-300))

    def _columns(self, colour: Colour) -> FloatArray:
        rows = self.problem.rows_under(colour)
        slopes = self.here.slopes_in(rows, self.coefficients, colour, rough=True)
        return np.column_stack([slopes, self.problem.columns_in(rows, self.here.theta, colour)])

    def white(self, colour: Colour) -> FloatArray:
        """(r + 1, s + 1 + q + 1) columns, well scaled, and residual."""
        columns = self._columns(colour)
        residual = self.problem.measured_white(colour) - columns[:, len(self.here.theta) :] @ self.coefficients
        return np.column_stack([columns / self._scale, residual])

    def white_waves(self, colour: Colour) -> FloatArray | None:
        """(r + 1, k) slow waves."""
        return self.problem.waves_in(self.problem.rows_under(colour), colour)
