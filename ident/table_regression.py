"""Frequency tables, alone or beside runs in time, as one regression: further rows in which the same plant is linear.

A point of a table is two rows, along the measured response and across it, each in standard errors. The unit-gain
structure's frequency response enters them by the gain, as its response in time does, so that structure choice,
intervals and plausible plants need not know where a row comes from.
"""

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from .plant import ComplexArray
from .regression import Regression
from .run import FloatArray
from .tables import Table, rows_of


@dataclass(frozen=True, eq=False)
class Weighed:
    """A table ready for a regression.

    Attributes
    ----------
    table : Table
    phase : (m,) array, rad, or None
        Along which the magnitudes lie: measured, or told by something else where the table has none. None: nothing
        tells it, and the magnitudes are those of a plant of positive gain.
    unit : float
        What one standard error of the table counts as: the standard deviation of the noise in time, over the size by
        which the table's errors are too small.
    """

    table: Table
    phase: FloatArray | None
    unit: float = 1.0

    def rows(self, model: ComplexArray) -> FloatArray:
        """A complex model, (m,) or (m, q), as rows; see `rows_of`."""
        if self.phase is None:
            return self.unit * rows_of(self.table, np.zeros(len(self.table.frequency)), np.abs(model))
        return self.unit * rows_of(self.table, self.phase, model)

    @property
    def target(self) -> FloatArray:
        """What the rows of the right model come near to."""
        turned = np.zeros(len(self.table.frequency)) if self.phase is None else self.phase
        return self.rows(np.asarray(self.table.magnitude * np.exp(1j * turned), dtype=np.complex128))


@dataclass(frozen=True, eq=False)
class TableRegression(Regression):
    """Runs and tables stacked for fitting one structure.

    Attributes
    ----------
    weighed : tuple of Weighed
    """

    weighed: tuple[Weighed, ...] = ()

    @cached_property
    def timed(self) -> Regression | None:
        """The runs alone."""
        return Regression(self.runs, self.structure, self.reference, self.fixed_command) if self.runs else None

    @cached_property
    def measured(self) -> FloatArray:
        """(n,) responses of all runs, then the rows of the tables."""
        rows = [w.target for w in self.weighed]
        return np.concatenate([*([self.timed.measured] if self.timed else []), *rows])

    @cached_property
    def stretches(self) -> list[slice]:
        """Those of the runs; each row of a table stands by itself."""
        timed = self.timed.stretches if self.timed else []
        return timed + [slice(i, i + 1) for i in range(self.timed_count, len(self.measured))]

    @cached_property
    def parts(self) -> tuple[slice, ...]:
        """Where each run lies in `measured`."""
        return self.timed.parts if self.timed else ()

    @cached_property
    def row_parts(self) -> tuple[slice, ...]:
        """Where each table's rows lie in `measured`."""
        out, at = [], self.timed_count
        for w in self.weighed:
            size = len(w.table.frequency) * (1 if w.table.phase is None else 2)
            out.append(slice(at, at + size))
            at += size
        return tuple(out)

    @cached_property
    def timed_count(self) -> int:
        """How many rows are samples in time."""
        return len(self.timed.measured) if self.timed else 0

    @cached_property
    def interval(self) -> float:
        """Sample interval of the runs; without runs the time in which the highest frequency turns by a radian, s."""
        return self.timed.interval if self.timed else 1.0 / max(w.table.span[1] for w in self.weighed)

    @cached_property
    def duration(self) -> float:
        """Length of the longest run; without runs the period of the lowest frequency, s."""
        return self.timed.duration if self.timed else 2 * np.pi / min(w.table.span[0] for w in self.weighed)

    @cached_property
    def fixed_columns(self) -> FloatArray:
        """(n, r) columns of the runs, zero in the rows of tables: a table knows no level."""
        fixed = self.timed.fixed_columns if self.timed else np.zeros((0, 0))
        return self._padded(fixed)

    @property
    def drifts(self) -> bool:
        """Whether a common drift rate is fitted."""
        return bool(self.timed and self.timed.drifts)

    @property
    def latest(self) -> float:
        """Greatest dead time, s; magnitudes alone know none."""
        return super().latest if self.runs or any(w.table.phase is not None for w in self.weighed) else 0.0

    @property
    def movement(self) -> float:
        """Standard deviation of the response in time; without runs the size of the tables."""
        rows = self.measured
        return float(np.std(rows[: self.timed_count]) if self.runs else np.sqrt(np.mean(rows**2)))

    @cached_property
    def exact_slopes(self) -> bool:
        """Slopes are differences."""
        return False

    def unit_response(self, shape: tuple[float, ...], dead_time: float) -> FloatArray:
        """(n,) response of the unit-gain structure in time, then in the rows of the tables."""
        timed = [self.timed.unit_response(shape, dead_time)] if self.timed else []
        return np.concatenate([*timed, self._rows(shape, dead_time)[:, 0]])

    def moving_columns(self, shape: tuple[float, ...], dead_time: float) -> FloatArray:
        """(n, 1 + k) columns that change with the shapes: unit response, a zero's part, initial states."""
        rows = self._rows(shape, dead_time)
        if self.timed is None:
            return rows
        timed = self.timed.moving_columns(shape, dead_time)
        return np.concatenate([timed, np.pad(rows, ((0, 0), (0, timed.shape[1] - rows.shape[1])))])

    def initial_columns(self, shape: tuple[float, ...]) -> FloatArray | None:
        """(n, k) decays of the initial states of unsettled runs, or None."""
        timed = self.timed.initial_columns(shape) if self.timed else None
        return None if timed is None else self._padded(timed)

    @cached_property
    def waves(self) -> FloatArray:
        """(n, k) slow waves in which the level of the runs may wander."""
        return self._padded(self.timed.waves if self.timed else np.zeros((0, 0)))

    def _padded(self, columns: FloatArray) -> FloatArray:
        return np.pad(columns, ((0, len(self.measured) - len(columns)), (0, 0)))

    def _rows(self, shape: tuple[float, ...], dead_time: float) -> FloatArray:
        """(rows of all tables, 1 or 2): the unit-gain structure, and s times it where there is a zero."""
        numerator, denominator = self.structure.polynomials(shape)
        out = []
        for w in self.weighed:
            s = 1j * w.table.frequency
            unit = np.polyval(numerator, s) / np.polyval(denominator, s) * np.exp(-s * dead_time)
            both = np.column_stack([unit, s * unit]) if self.structure.zero else unit[:, None]
            out.append(w.rows(both))
        return np.concatenate(out)
