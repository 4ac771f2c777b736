"""All fit runs as one regression: unit-gain responses, levels, and what else enters linearly."""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from scipy.signal import lfilter

from .catalogue import Structure
from .friction import friction_response
from .local import Local
from .modes import Modes, modes_of
from .noise import Seen, sampled
from .projected import Projected, Solved, projected, root_of_covariance
from .run import FloatArray, Run
from .sandwich import sandwich_covariance
from .simulate import Grid, at_rest, grid_of, response
from .wander import Whitener, slow_waves
from .whiten import Colour, stretches_of

# Share of the record's whole movement that a stretch of rest may wander, smoothed, and still be rest.
_STIR = 0.1
_NO_WAVES = np.zeros((0, 0))


@dataclass(frozen=True, eq=False)
class Regression:
    """Runs stacked for fitting one structure.

    Attributes
    ----------
    runs : tuple of Run
    structure : Structure
    reference : float, command unit
        Deviations of the command count from here.
    fixed_command : bool
        The operating command is stated, so an integrating plant has no drift rate of its own.
    """

    runs: tuple[Run, ...]
    structure: Structure
    reference: float
    fixed_command: bool

    @cached_property
    def grids(self) -> tuple[Grid, ...]:
        """One grid a run."""
        return tuple(grid_of(run) for run in self.runs)

    @cached_property
    def measured(self) -> FloatArray:
        """(n,) valid responses of all runs, response unit."""
        parts = [run.response if run.valid.all() else run.response[run.valid] for run in self.runs]
        return parts[0] if len(parts) == 1 else np.concatenate(parts)

    @property
    def movement(self) -> float:
        """Standard deviation of the response, to which a misfit is relative."""
        return float(np.std(self.measured))

    @cached_property
    def stretches(self) -> list[slice]:
        """Consecutive valid samples, numbered in `measured`."""
        out: list[slice] = []
        at = 0
        for run in self.runs:
            out += [slice(part.start + at, part.stop + at) for part in stretches_of(run.valid)]
            at += int(run.valid.sum())
        return out

    @cached_property
    def parts(self) -> tuple[slice, ...]:
        """Where each run lies in `measured`."""
        ends = np.cumsum([int(run.valid.sum()) for run in self.runs])
        return tuple(slice(int(a), int(b)) for a, b in zip(np.concatenate([[0], ends[:-1]]), ends, strict=True))

    @cached_property
    def unsettled(self) -> tuple[bool, ...]:
        """Runs that do not begin with a stretch of rest: their initial state is fitted."""
        return tuple(starts_unsettled(run) for run in self.runs)

    @cached_property
    def interval(self) -> float:
        """Typical sample interval, s."""
        even = [grid.interval for grid in self.grids if grid.interval is not None]
        if len(even) == len(self.grids) == 1:
            return even[0]
        return float(np.median(np.concatenate([np.diff(grid.time) for grid in self.grids])))

    @cached_property
    def duration(self) -> float:
        """Length of the longest run, s."""
        return float(max(grid.time[-1] for grid in self.grids))

    @cached_property
    def fixed_columns(self) -> FloatArray:
        """(n, r) columns that no shape changes: levels, an integrating plant's drift, a double one's first speeds."""
        n = len(self.measured)
        columns = []
        for part in self.parts:
            level = np.zeros(n)
            level[part] = 1.0
            columns.append(level)
        times = [grid.time[run.valid] for grid, run in zip(self.grids, self.runs, strict=True)]
        if self.drifts:
            columns.append(np.concatenate([at_rest(self.structure.integrators, time) for time in times]))
        if self.structure.integrators > 1:
            for part, time in zip(self.parts, times, strict=True):
                speed = np.zeros(n)
                speed[part] = time
                columns.append(speed)
        return np.column_stack(columns)

    @property
    def drifts(self) -> bool:
        """Whether a common drift rate is fitted."""
        return bool(self.structure.integrators) and not self.fixed_command

    @property
    def jumps(self) -> bool:
        """Whether the response jumps with the command: a structure with as many zeros as poles.

        Between which samples it jumped is seen, but not when: the dead time is known to an interval at best.
        """
        numerator, denominator = self.structure.polynomials((1.0,) * len(self.structure.shapes))
        return len(numerator) + int(self.structure.zero) == len(denominator)

    @property
    def soonest(self) -> float:
        """Least dead time, s: in closed loop the command follows from the sample, which it can't have moved yet."""
        return 1e-3 * self.interval if self.jumps and self.feeds_back else 0.0

    @property
    def latest(self) -> float:
        """Greatest dead time, s: a longer one than this share of the record is not looked for."""
        return 0.9 * self.duration

    @property
    def earliest(self) -> float:
        """Least dead time at which columns may be asked for, s: in closed loop a command ahead of its time has seen the
        noise of the very sample that it would explain."""
        return self.soonest if self.feeds_back else -np.inf

    @cached_property
    def feeds_back(self) -> bool:
        """Whether any run was taken in closed loop."""
        return any(run.closed_loop for run in self.runs)

    @cached_property
    def span(self) -> float:
        """Largest distance of any command from the reference, command unit."""
        return max(float(np.max(np.abs(run.command - self.reference))) for run in self.runs)

    def modes(self, shape: tuple[float, ...]) -> Modes:
        """Modes of the unit-gain structure."""
        return modes_of(*self.structure.polynomials(shape))

    def unit_response(self, shape: tuple[float, ...], dead_time: float) -> FloatArray:
        """(n,) response of the unit-gain structure to all commands, less its value at the reference command."""
        return np.concatenate([self.whole_response(i, shape, dead_time)[run.valid] for i, run in enumerate(self.runs)])

    def whole_response(self, i: int, shape: tuple[float, ...], dead_time: float) -> FloatArray:
        """The same for run i alone, at all its samples."""
        run, grid = self.runs[i], self.grids[i]
        bias = run.start_command - self.reference
        if self.structure.friction:
            return friction_response(grid, bias, shape[0], (shape[1], shape[2]), dead_time)
        return response(self.modes(shape), grid, dead_time) + self.bias_response(i)

    def bias_response(self, i: int) -> FloatArray | float:
        """What the steady command before run i makes of the unit-gain structure by itself."""
        bias = self.runs[i].start_command - self.reference
        return bias * at_rest(self.structure.integrators, self.grids[i].time) if bias else 0.0

    @property
    def condensed(self) -> bool:
        """Whether few rows stand for the samples."""
        return False

    @property
    def exact_slopes(self) -> bool:
        """Whether every run is sampled evenly and every mode is of first order."""
        even = all(grid.interval is not None for grid in self.grids)
        return even and not self.structure.friction and self.structure.integrators < 2

    def zero_response(self, i: int, shape: tuple[float, ...], dead_time: float) -> FloatArray:
        """Response of run i to the slope of its command: what a zero adds, per gain and second of zero time."""
        return response(self.slope_modes(shape), self.grids[i], dead_time)

    def slope_modes(self, shape: tuple[float, ...]) -> Modes:
        """Modes of s times the unit-gain structure."""
        numerator, denominator = self.structure.polynomials(shape)
        return modes_of((*numerator, 0.0), denominator)

    @property
    def zero_at(self) -> int:
        """Where gain times zero time stands among the coefficients of a structure with a zero."""
        return 1 + self.fixed_count

    @property
    def fixed_count(self) -> int:
        """How many columns no shape changes."""
        return int(self.fixed_columns.shape[1])

    @property
    def wave_count(self) -> int:
        """How many slow waves there are."""
        return int(self.waves.shape[1])

    def moving_columns(self, shape: tuple[float, ...], dead_time: float) -> FloatArray:
        """(n, 1 + k) columns that change with the shapes: unit response, a zero's part, initial states."""
        columns = [self.unit_response(shape, dead_time)[:, None]]
        if self.structure.zero:
            zero = [self.zero_response(i, shape, dead_time)[run.valid] for i, run in enumerate(self.runs)]
            columns.append(np.concatenate(zero)[:, None])
        initial = self.initial_columns(shape)
        if initial is not None:
            columns.append(initial)
        return np.column_stack(columns) if len(columns) > 1 else columns[0]

    def columns(self, theta: FloatArray) -> FloatArray:
        """(n, q) columns that the coefficients weigh, in their order."""
        moving = self.moving_columns(*self.split(theta))
        return np.column_stack([moving[:, :1], self.fixed_columns, moving[:, 1:]])

    def initial_columns(self, shape: tuple[float, ...]) -> FloatArray | None:
        """(n, k) decays of the initial states of unsettled runs, or None."""
        if not any(self.unsettled):
            return None
        modes = self.modes(shape)
        n = len(self.measured)
        columns = []
        for run, grid, part, free in zip(self.runs, self.grids, self.parts, self.unsettled, strict=True):
            for pole in modes.poles[modes.poles != 0] if free else ():
                decay = np.exp(pole * grid.time[run.valid])
                for piece in (decay.real, decay.imag) if pole.imag else (decay.real,):
                    column = np.zeros(n)
                    column[part] = piece
                    columns.append(column)
        return np.column_stack(columns) if columns else None

    @cached_property
    def waves(self) -> FloatArray:
        """(n, k) slow waves in which the level may wander."""
        return slow_waves([grid.time[run.valid] for grid, run in zip(self.grids, self.runs, strict=True)])

    def whitener(self, colour: Colour) -> Whitener:
        """The whitener of this colour; the last one is kept."""
        kept = self._whiteners
        if colour not in kept:
            kept.clear()
            kept[colour] = Whitener(self.stretches, colour, self.waves if colour.wander > 0.0 else _NO_WAVES)
        return kept[colour]

    @cached_property
    def _whiteners(self) -> dict[Colour, Whitener]:
        return {}

    def solve(self, theta: FloatArray, colour: Colour) -> Solved:
        """Best linear part at theta = (log shapes ..., dead time in s)."""
        return self.solve_at(self.at(theta), colour).solved

    def solve_at(self, here: Local, colour: Colour) -> Projected:
        """The same from columns already made, with what `Projected.cleared` needs."""
        return projected(here.columns_under(colour), self.target_under(colour))

    def target_under(self, colour: Colour) -> FloatArray:
        """(n',) measured response whitened."""
        return self._whitened(colour)[0]

    def fixed_under(self, colour: Colour) -> FloatArray:
        """(n', r) fixed columns whitened."""
        return self._whitened(colour)[1]

    def at(self, theta: FloatArray) -> Local:
        """Columns and slopes about theta."""
        return Local(self, theta)

    def conditional(self, theta: FloatArray, colour: Colour) -> tuple[Solved, FloatArray, float]:
        """`solve`, A with A A' = (X' X)^-1 of the whitened columns, and the log of A's volume."""
        found = self.solve_at(self.at(theta), colour)
        return found.solved, *root_of_covariance(found.matrix)

    def split(self, theta: FloatArray) -> tuple[tuple[float, ...], float]:
        """Shape values and dead time of theta."""
        return tuple(float(v) for v in np.exp(theta[:-1])), float(theta[-1])

    def _whitened(self, colour: Colour) -> tuple[FloatArray, FloatArray]:
        """Measured response and fixed columns under the last colour asked for; every solve needs them again."""
        cache = self._white_cache
        if colour not in cache:
            cache.clear()
            both = np.column_stack([self.measured, self.fixed_columns])
            white = self.whitener(colour).apply(both)
            cache[colour] = (np.ascontiguousarray(white[:, 0]), np.ascontiguousarray(white[:, 1:]))
        return cache[colour]

    @cached_property
    def _white_cache(self) -> dict[Colour, tuple[FloatArray, FloatArray]]:
        return {}

    def full_columns(self, theta: FloatArray, coefficients: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Unwhitened model, (n,), and its derivatives, (n, s + 1 + q): log shapes, dead time, then the linear part."""
        here = self.at(theta)
        columns = here.columns
        return columns @ coefficients, np.column_stack([here.slopes(coefficients), columns])

    def seen_about(self, theta: FloatArray, coefficients: FloatArray) -> Seen:
        """What an estimate of the noise looks at."""
        model, columns = self.full_columns(theta, coefficients)
        return sampled(columns, self.measured - model, self.stretches, self.waves)

    def model(self, theta: FloatArray, coefficients: FloatArray) -> FloatArray:
        """(n,) unwhitened model."""
        return self.at(theta).columns @ coefficients

    def least_squares_covariance(self, theta: FloatArray, coefficients: FloatArray, colour: Colour) -> FloatArray:
        """(s + 1 + q,) squared: of plain least squares under this noise."""
        model, columns = self.full_columns(theta, coefficients)
        return sandwich_covariance(columns, self.measured - model, self.stretches, colour, self.waves)

    def further_directions(self, theta: FloatArray, colour: Colour, times: FloatArray) -> FloatArray | None:
        """(n', k) whitened: the bare command, and it and the model behind lags of these times, s; see `unexplained`."""
        shape, dead_time = self.split(theta)
        blocks = []
        for i, run in enumerate(self.runs):
            whole = self.whole_response(i, shape, dead_time)
            bare = [response(modes_of((1.0,), (float(time), 1.0)), self.grids[i], 0.0) for time in times]
            behind = [_lagged(whole, self.interval, time) for time in times]
            blocks.append(np.column_stack([self.grids[i].moved, *bare, *behind])[run.valid])
        return self.whitener(colour).apply(np.concatenate(blocks))

    def rms(self, theta: FloatArray, coefficients: FloatArray) -> float:
        """Root mean square of measured - model, response unit."""
        return float(np.sqrt(np.mean((self.measured - self.model(theta, coefficients)) ** 2)))

    def steps(self, theta: FloatArray) -> list[FloatArray]:
        """Difference steps, one vector a parameter of theta."""
        sizes = np.full(len(theta), 1e-4)
        sizes[-1] = min(0.02 * self.interval, max(theta[-1], 1e-3 * self.interval))
        return [np.where(np.arange(len(theta)) == i, size, 0.0) for i, size in enumerate(sizes)]


def _lagged(whole: FloatArray, interval: float, time: float) -> FloatArray:
    """Behind one more lag; sampled roughly, for it only serves as a direction."""
    decay = np.exp(-interval / time)
    return np.asarray(lfilter([1 - decay], [1.0, -decay], whole - whole[0]))


def starts_unsettled(run: Run) -> bool:
    """Whether the record begins without a stretch of rest long enough to trust that nothing was moving."""
    if run.at_rest:
        return False
    if run.start_command != run.command[0]:
        return True
    span = np.ptp(run.command)
    changes = np.flatnonzero(np.abs(run.command - run.command[0]) > 1e-3 * span) if span > 0 else np.array([])
    first = int(changes[0]) if len(changes) else len(run.time)
    if first < max(5, len(run.time) // 100):
        return True
    rest = run.response[:first][run.valid[:first]]
    if len(rest) == 0:
        return True
    width = max(len(rest) // 6, 1)
    sums = np.concatenate([[0.0], np.cumsum(rest - rest[0])])
    smooth = (sums[width:] - sums[:-width]) / width
    middle = np.median(rest)
    farthest = max(np.nanmax(run.response) - middle, middle - np.nanmin(run.response))
    return bool(len(smooth) > 0 and np.ptp(smooth) > _STIR * farthest)
