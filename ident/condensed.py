"""A regression on a long record of steps that looks at few rows: blocks for the data, closed form for the model."""

from dataclasses import dataclass, field, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import matmul_toeplitz

from .condensed_local import CondensedLocal, Rows, RowsSeen
from .gram_blocks import GramBlocks, lay_out
from .modes import modes_of
from .noise import Seen
from .pieces import Pieces, Places, read_off
from .regression import Regression
from .run import FloatArray, Run
from .sandwich import grouped_autocovariance, sandwiched
from .step_pieces import Steps, friction_pieces, power_piece, steps_of, unit_pieces, wave_piece
from .wander import WAVES, Whitener
from .whiten import WHITE, Colour, stretches_of, whiten

# Fewer samples are fitted as they are.
_LONG = 25_000
# A change of the command costs a few hundred rows.
_SAMPLES_A_CHANGE = 1000
# Samples that stand by themselves behind each event, under white noise; the noise's memory adds to them.
_SETTLE = 32
_MEMORIES = 18.0
# Rows above this share of the samples save nothing.
_WORTH = 0.5


# Samples whose model is made at once.
_AT_ONCE = 65_536
# Groups of samples over which the covariance of plain least squares is summed.
_GROUPS = 20_000
# The noise of a longer record is estimated from as many samples in so many stretches.
_GLIMPSED = 150_000
_GLIMPSES = 16


@dataclass(frozen=True, eq=False)
class Condensed(Regression):
    """Runs stacked for fitting one structure near a first guess.

    Attributes
    ----------
    centre : (s + 1,) array
        Theta about which the blocks were laid out.
    reach : float, s
        Dead times so far from the centre's are still seen sample by sample.
    shared : dict
        Whitened responses by colour, shared between structures on the same runs; the last one is kept.
    """

    centre: FloatArray = field(default_factory=lambda: np.zeros(1))
    reach: float = 0.0
    shared: dict[Colour, FloatArray] = field(default_factory=dict)

    def near(self, theta: FloatArray) -> bool:
        """Whether the blocks serve for this theta too."""
        shape, centre = np.exp(theta[:-1]), np.exp(self.centre[:-1])
        kinds = [s.kind for s in self.structure.shapes]
        quick = all(s < 1.3 * c for s, c, kind in zip(shape, centre, kinds, strict=True) if kind == "frequency")
        return quick and abs(theta[-1] - self.centre[-1]) <= 0.5 * self.reach

    def at(self, theta: FloatArray) -> "CondensedLocal":
        """Columns and slopes about theta."""
        return CondensedLocal(self, theta)

    @property
    def condensed(self) -> bool:
        """Whether few rows stand for the samples."""
        return True

    @cached_property
    def rows(self) -> int:
        """How many rows there are under white noise."""
        return sum(len(blocks.at) for blocks in self.blocks(WHITE))

    def blocks(self, colour: Colour) -> tuple[GramBlocks, ...]:
        """Layout of each run, wide enough behind each event for the memory of this noise."""
        memory = 0.0 if colour.c == 0 else _MEMORIES / max(-np.log(abs(colour.c)), 1e-3)
        settle = _SETTLE << max(int(np.ceil(np.log2(max(memory, 1.0) / _SETTLE))), 0)
        kept = self._layouts
        if settle not in kept:
            kept[settle] = tuple(self._laid_out(i, settle) for i in range(len(self.runs)))
        return kept[settle]

    @cached_property
    def _layouts(self) -> dict[int, tuple[GramBlocks, ...]]:
        return {}

    def _laid_out(self, i: int, settle: int) -> GramBlocks:
        run, grid = self.runs[i], self.grids[i]
        step = float(grid.interval or 1.0)
        shape, dead_time = self.split(self.centre)
        low, high = max(dead_time - self.reach, 0.0), dead_time + self.reach
        events = [self._unit(i, shape, at).start[1:] / step for at in (low, high)]
        if len(events[0]) != len(events[1]):
            events = [events[0], events[0] + (high - low) / step]
        windows = [(int(a), int(np.ceil(b)) + 1) for a, b in zip(*events, strict=True) if a < len(run.time)]
        modes = self.modes(shape)
        ringing = [(abs(p.imag) * step, abs(p.real) * step) for p in modes.poles.tolist() if p.imag]
        return lay_out(self.own_stretches[i], windows, settle, ringing)

    @cached_property
    def own_stretches(self) -> list[list[slice]]:
        """Consecutive valid samples of each run, numbered in the run."""
        return [_own_stretches(run) for run in self.runs]

    @cached_property
    def _begins(self) -> list[NDArray[np.int64]]:
        return [np.array([part.start for part in parts], dtype=np.int64) for parts in self.own_stretches]

    @cached_property
    def command_steps(self) -> list[Steps]:
        """Changes of each run's command."""
        return [steps_of(grid) for grid in self.grids]

    def rows_under(self, colour: Colour) -> Rows:
        """Rows that stand for all samples under this noise."""
        blocks = self.blocks(colour)
        return Rows(tuple(b.at for b in blocks), tuple(b.weight for b in blocks))

    def stacked(self, pieces: list[Pieces | None], rows: Rows, colour: Colour) -> FloatArray:
        """(r + 1,) column whitened but for the waves, pieces a run (None: zero there).

        The last row is that of the noise the blocks leave over; no model has a part in it.
        """
        parts = []
        for i, (each, at, weight) in enumerate(zip(pieces, rows.at, rows.weight, strict=True)):
            if each is None or not len(at):
                parts.append(np.zeros(len(at)))
                continue
            step = float(self.grids[i].interval or 1.0)
            parts.append(read_off(each, Places(at, weight, step, self._begins[i]), colour))
        return np.concatenate([*parts, [0.0]])

    def moving_in(self, rows: Rows, theta: FloatArray, colour: Colour) -> FloatArray:
        """(r + 1, 1 + k) columns that change with the shapes, as `moving_columns` has them."""
        shape, dead_time = self.split(theta)
        count = range(len(self.runs))
        unit = self.stacked([self._unit(i, shape, dead_time) for i in count], rows, colour)
        bias = [run.start_command - self.reference for run in self.runs]
        if any(bias) and not self.structure.friction:
            n = self.structure.integrators
            unit = unit + self.stacked([power_piece(n, b / max(n, 1)) for b in bias], rows, colour)
        columns = [unit]
        if self.structure.zero:
            slopes = [unit_pieces(self.slope_modes(shape), steps, dead_time) for steps in self.command_steps]
            columns.append(self.stacked(list(slopes), rows, colour))
        for i, free in enumerate(self.unsettled):
            poles = [pole for pole in self.modes(shape).poles.tolist() if pole] if free else []
            for pole in poles:
                amounts = (1.0, -1j) if pole.imag else (1.0,)
                columns += [self._only(i, wave_piece(pole, amount), rows, colour) for amount in amounts]
        return np.column_stack(columns)

    def columns_in(self, rows: Rows, theta: FloatArray, colour: Colour) -> FloatArray:
        """(r + 1, q) columns in their order."""
        moving = self.moving_in(rows, theta, colour)
        return np.column_stack([moving[:, :1], self._fixed_in(rows, colour), moving[:, 1:]])

    def _unit(self, i: int, shape: tuple[float, ...], dead_time: float) -> Pieces:
        if self.structure.friction:
            bias = self.runs[i].start_command - self.reference
            end = float(self.grids[i].time[-1])
            return friction_pieces(self.command_steps[i], end, bias, shape[0], (shape[1], shape[2]), dead_time)
        return unit_pieces(self.modes(shape), self.command_steps[i], dead_time)

    def _only(self, i: int, pieces: Pieces, rows: Rows, colour: Colour) -> FloatArray:
        return self.stacked([pieces if j == i else None for j in range(len(self.runs))], rows, colour)

    def _fixed_in(self, rows: Rows, colour: Colour) -> FloatArray:
        count = range(len(self.runs))
        columns = [self._only(i, power_piece(0), rows, colour) for i in count]
        n = self.structure.integrators
        if self.drifts:
            columns.append(self.stacked([power_piece(n, 1.0 / max(n, 1)) for _ in count], rows, colour))
        if n > 1:
            columns += [self._only(i, power_piece(1), rows, colour) for i in count]
        return np.column_stack(columns)

    @property
    def fixed_count(self) -> int:
        """How many columns no shape changes."""
        return len(self.runs) * (2 if self.structure.integrators > 1 else 1) + int(self.drifts)

    @property
    def wave_count(self) -> int:
        """How many slow waves there are."""
        return WAVES * len(self.runs)

    def waves_in(self, rows: Rows, colour: Colour) -> FloatArray:
        """(r + 1, k) slow waves."""
        columns = []
        for i in range(len(self.runs)):
            time, own = self.grids[i].time, self.own_stretches[i]
            begins, ends = time[own[0].start], time[own[-1].stop - 1]
            turn = 1j * np.pi / max(ends - begins, 1e-300)
            orders = range(1, WAVES + 1)
            columns += [self._only(i, wave_piece(k * turn, 1.0 / k, begins), rows, colour) for k in orders]
        return np.column_stack(columns)

    def whitener(self, colour: Colour) -> Whitener:
        """The whitener of this colour, for rows that `stacked` gave; the last one is kept."""
        kept = self._whiteners
        if colour not in kept:
            kept.clear()
            kept[colour] = _RowWhitener(self.stretches, colour, np.zeros((0, 0)), self)
        return kept[colour]

    def measured_white(self, colour: Colour) -> FloatArray:
        """(r + 1,) measured rows, whitened but for the waves."""
        fast = Colour(colour.rho, colour.c)
        if fast not in self.shared:
            self.shared.clear()
            self.shared[fast] = whiten(self.measured, self.stretches, fast)
        white = self.shared[fast]
        parts = []
        for blocks, part, run in zip(self.blocks(colour), self.parts, self.runs, strict=True):
            index = np.cumsum(run.valid) - 1 if not run.valid.all() else np.arange(len(run.time))
            parts.append(blocks.gathered(white[part], index))
        rows = np.concatenate(parts)
        left = max(float(white @ white) - float(rows @ rows), 0.0)
        return np.concatenate([rows, [np.sqrt(left)]])

    def _whitened(self, colour: Colour) -> tuple[FloatArray, FloatArray]:
        cache = self._white_cache
        if colour not in cache:
            cache.clear()
            whitener = self.whitener(colour)
            target = whitener.cleared(self.measured_white(colour))
            cache[colour] = (target, whitener.cleared(self._fixed_in(self.rows_under(colour), colour)))
        return cache[colour]

    def seen_about(self, theta: FloatArray, coefficients: FloatArray) -> Seen:
        """What an estimate of the noise looks at: every sample of the response, the model in closed form.

        Of a very long record it looks at some stretches only, spread evenly.
        """
        seen = self._glimpsed
        return RowsSeen(seen, seen.at(theta), coefficients)

    @cached_property
    def _glimpsed(self) -> "Condensed":
        total = len(self.measured)
        if total <= _GLIMPSED:
            return self
        runs = []
        for run in self.runs:
            n = len(run.time)
            length = max(int(n * _GLIMPSED / total / _GLIMPSES), 1)
            inside = np.zeros(n, dtype=bool)
            for first in np.linspace(0, n - length, _GLIMPSES).astype(int):
                inside[first : first + length] = True
            runs.append(replace(run, response=np.where(inside, run.response, np.nan)))
        seen = replace(self, runs=tuple(runs), shared={})
        for name in ("grids", "unsettled", "interval", "duration", "span", "command_steps"):
            seen.__dict__[name] = getattr(self, name)
        return seen

    def further_directions(self, theta: FloatArray, colour: Colour, times: FloatArray) -> FloatArray | None:
        """(r, k) whitened: the bare command, and it and the model behind lags of these times, s; see `unexplained`."""
        if self.structure.friction:
            return None
        shape, dead_time = self.split(theta)
        numerator, denominator = self.structure.polynomials(shape)
        rows = self.rows_under(colour)
        formulas: list[tuple[tuple[float, ...], tuple[float, ...], float]] = [((1.0,), (1.0,), 0.0)]
        formulas += [((1.0,), (float(time), 1.0), 0.0) for time in times]
        behind = [tuple(float(c) for c in np.polymul(denominator, (time, 1.0))) for time in times]
        formulas += [(numerator, below, dead_time) for below in behind]
        columns = [
            self.stacked([unit_pieces(modes_of(n, d), steps, late) for steps in self.command_steps], rows, colour)
            for n, d, late in formulas
        ]
        return self.whitener(colour).cleared(np.column_stack(columns))

    def model(self, theta: FloatArray, coefficients: FloatArray) -> FloatArray:
        """(n,) unwhitened model, made a part at a time."""
        out = np.empty(len(self.measured))
        for i, (run, part) in enumerate(zip(self.runs, self.parts, strict=True)):
            where = np.flatnonzero(run.valid)
            for first in range(0, len(where), _AT_ONCE):
                at = where[first : first + _AT_ONCE].astype(float)
                own = [np.zeros(0)] * len(self.runs)
                own[i] = at
                rows = Rows(tuple(own), tuple(np.ones(len(a)) for a in own))
                columns = self.columns_in(rows, theta, WHITE)
                out[part.start + first : part.start + first + len(at)] = columns[:-1] @ coefficients
        return out

    def least_squares_covariance(self, theta: FloatArray, coefficients: FloatArray, colour: Colour) -> FloatArray:
        """`sandwich_covariance`, the noise summed over groups of samples in which the columns hardly change."""
        here, size = self.at(theta), max(len(self.measured) // _GROUPS, 1)
        columns = np.column_stack([here.slopes_under(coefficients, WHITE), here.columns_under(WHITE)])
        left = self.target_under(WHITE) - columns[:, len(theta) :] @ coefficients
        middles = [
            [np.arange(part.start, part.stop - size + 1, size) + 0.5 * (size - 1) for part in parts]
            for parts in self.own_stretches
        ]
        at = tuple(np.concatenate(run) for run in middles)
        rows = Rows(at, tuple(np.ones(len(each)) for each in at))
        slopes = here.slopes_in(rows, coefficients, WHITE)
        groups = np.column_stack([slopes, self.columns_in(rows, theta, WHITE)])[:-1]
        gamma = grouped_autocovariance(colour, size, len(groups))
        ends = np.cumsum([len(part) for run in middles for part in run])
        spread = [matmul_toeplitz(gamma[: len(part)], part) for part in np.split(groups, ends[:-1]) if len(part)]
        waves = self.waves_in(rows, WHITE)[:-1]
        power = float(np.mean(np.einsum("ij,ij->i", waves, waves)))
        meat = groups.T @ np.concatenate(spread)
        squares = float(left @ left)
        n = len(self.measured)
        return sandwiched(columns.T @ columns, meat, size * waves.T @ groups, power, squares, n, colour)

    def rms(self, theta: FloatArray, coefficients: FloatArray) -> float:
        """Root mean square of measured - model, response unit."""
        left = self._whitened(WHITE)[0] - self.at(theta).columns_under(WHITE) @ coefficients
        return float(np.sqrt(left @ left / len(self.measured)))


@dataclass(frozen=True, eq=False)
class _RowWhitener(Whitener):
    problem: Condensed

    @cached_property
    def _white_waves(self) -> FloatArray:
        return self.problem.waves_in(self.problem.rows_under(self.colour), self.colour)


def _own_stretches(run: Run) -> list[slice]:
    """Consecutive valid samples, numbered in the run."""
    where = np.flatnonzero(run.valid)
    return [slice(int(where[part.start]), int(where[part.stop - 1]) + 1) for part in stretches_of(run.valid)]


def can_condense(problem: Regression) -> bool:
    """Whether all runs are long, evenly sampled and of few steps."""
    if sum(len(run.time) for run in problem.runs) < _LONG or type(problem) is not Regression:
        return False
    for run, grid in zip(problem.runs, problem.grids, strict=True):
        changes = int(np.count_nonzero(np.diff(run.command)))
        if grid.interval is None or grid.interpolated or run.closed_loop:
            return False
        if (changes + len(stretches_of(run.valid))) * _SAMPLES_A_CHANGE > len(run.time):
            return False
    return True


def take_over(problem: Regression, known: Regression) -> None:
    """What does not depend on the structure, from a regression on the same runs."""
    for name in ("grids", "measured", "stretches", "parts", "unsettled", "interval", "duration", "span"):
        problem.__dict__[name] = getattr(known, name)
    if "_steps" not in known.__dict__:
        known.__dict__["_steps"] = [steps_of(grid) for grid in known.grids], [_own_stretches(run) for run in known.runs]
    problem.__dict__["_steps"] = known.__dict__["_steps"]
    problem.__dict__["command_steps"], problem.__dict__["own_stretches"] = known.__dict__["_steps"]


def condensed(problem: Regression, theta: FloatArray, reach: float, shared: dict[Colour, FloatArray]) -> Regression:
    """The same in few rows about theta; the problem itself where that saves little."""
    small = Condensed(
        problem.runs, problem.structure, problem.reference, problem.fixed_command, theta.copy(), reach, shared
    )
    take_over(small, problem)
    return small if small.rows < _WORTH * len(problem.measured) else problem
