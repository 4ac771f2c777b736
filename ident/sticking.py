"""Whether a valve sticks between command and plant: found, sized and drawn from open-loop records.

A valve that sticks leaves the response short of where the command sent it, to the side that it came from. Drift, a gain
that bends with the command and a plant that is not quite the fitted one do not follow the command's turns in that way.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from scipy.special import expit

from .choose import Fitted
from .noise import colour_seen, estimate_colour, sampled
from .play import LEAST_SHARE, Sticking, Valve, through_valve
from .projected import projected
from .regression import Regression
from .run import FloatArray, Run
from .simulate import response
from .table_regression import TableRegression
from .valve_size import ValveSize, valve_sizes
from .wander import Whitener
from .whiten import WHITE, Colour

# Rise of twice the log likelihood that a valve must bring, and in white noise before anything dear is tried: four
# standard errors (common practice, no source).
_SURE = 16.0
# The same for a valve that is there perhaps: with one degree of freedom noise alone gives more in 5 % of the records.
_PERHAPS = 3.84
# The greatest chance of a valve that is not sure.
_ALMOST = 0.95
# Half widths that are tried first, shares of the command's whole movement.
_BANDS = (0.005, 0.01, 0.02, 0.04, 0.08)
_SHARES = 8
# Samples up to which a record is looked at: a longer one is fitted through few rows, which a valve is not in.
_LONGEST = 60_000
# Half widths of a play that are weighed first, from and to these shares of the command's whole movement.
_REACH = (0.001, 0.25)
_COARSE, _FINE = 24, 11
_BELIEVED = 0.1
# A gain that bends with the command: quadratic and cubic.
_BENDS = 2


def find_sticking(fitted: Fitted) -> Sticking | None:
    """The valve that the records show before this plant, or None.

    Notes
    -----
    Maximum likelihood with and without what the valve holds back, to first order in its half width, each under its own
    noise. Beside it stand the model's own slopes and a gain that bends with the command, quadratic and cubic.
    """
    look = _Look.at(fitted)
    if look is None:
        return None
    directions = [look.held_back(share * look.span) / (share * look.span) for share in _BANDS]
    scores = [look.gain(column, (WHITE,))[0] for column in directions]
    best = int(np.argmax(scores))
    if scores[best] < _SURE:
        return None
    column = directions[best]
    colours = tuple(
        estimate_colour(columns, look.residual, look.problem.stretches, look.problem.waves)
        for columns in (look.base, np.column_stack([look.base, column]))
    )
    sureness, first, colour = look.gain(column, colours)
    if sureness < _PERHAPS:
        return None
    return look.sized(colour, sureness, first)


def sized_behind(sticking: Sticking, through: Fitted, runs: Sequence[Run], colour: Colour) -> Sticking:
    """The valve's numbers once more, before a plant that was fitted behind it.

    Parameters
    ----------
    through : Fitted
        Of the commands that got through the valve.
    runs : sequence of Run
        As logged.
    """
    look = _Look.at(through, runs)
    if look is None:
        return sticking
    return look.sized(colour, sticking.sureness, sticking.valve.short)


def likelihood_loss(fitted: Fitted) -> float:
    """-2 log likelihood up to a constant, and what the parameters cost (Bayesian information criterion).

    Under the noise that suits the plant best, with a gain that bends with the command or without, whichever is likelier
    by more than the bends cost.
    """
    look = _Look.at(fitted)
    if look is None:
        return np.inf
    n = len(look.residual)
    unknowns = len(fitted.theta) + len(fitted.solved.coefficients)
    losses: list[float] = []
    near: Colour | None = None
    for bends in (0, _BENDS):
        columns = look.base[:, : look.base.shape[1] - _BENDS + bends]
        near = colour = colour_seen(sampled(columns, look.residual, look.problem.stretches, look.problem.waves), near)
        whitener = look.whitener(colour)
        white = whitener.apply(np.column_stack([columns, look.residual]))
        cost = max(projected(white[:, :-1], white[:, -1]).solved.cost, 1e-300)
        losses.append(n * float(np.log(cost)) + whitener.log_determinant + (unknowns + bends) * float(np.log(n)))
    return min(losses)


def chance_of(sticking: Sticking, through: Fitted, plain: Fitted) -> float:
    """How likely the valve is; one where the plant behind it explains the records so much better that it must be there.

    Then it brings what was asked of it to first order, and at least its price as one more parameter. Below that the two
    stand beside each other by their likelihood, the valve paying for two parameters what they gain by chance (Akaike).
    """
    gained = likelihood_loss(plain) - likelihood_loss(through)
    if min(gained, sticking.sureness) > max(_SURE, float(np.log(len(plain.problem.measured)))):
        return 1.0
    return float(min(expit(0.5 * (max(gained, sticking.sureness) - 4.0)), _ALMOST))


@dataclass(frozen=True, eq=False)
class _Look:
    """A fitted plant with what else may move its response."""

    problem: Regression
    theta: FloatArray
    gain_of_plant: float
    base: FloatArray
    residual: FloatArray
    span: float

    @classmethod
    def at(cls, fitted: Fitted, logged: Sequence[Run] = ()) -> "_Look | None":
        own = fitted.problem
        runs = tuple(logged) or own.runs
        dear = isinstance(own, TableRegression) or sum(len(run.time) for run in runs) > _LONGEST
        if dear or own.structure.friction or own.jumps or own.structure.integrators > 1:
            return None
        if any(run.closed_loop for run in runs):
            return None
        gain = float(own.solve(fitted.theta, WHITE).coefficients[0])
        problem = Regression(runs, own.structure, own.reference, own.fixed_command)
        coefficients = problem.solve(fitted.theta, WHITE).coefficients
        model, columns = problem.full_columns(fitted.theta, coefficients)
        span = float(max(np.ptp(np.append(run.command, run.start_command)) for run in runs))
        bare = cls(problem, fitted.theta, gain, columns, problem.measured - model, span)
        powers = range(2, 2 + _BENDS)
        bent = [bare.response_to([_bent(run, problem.reference, span, power) for run in runs]) for power in powers]
        return replace(bare, base=np.column_stack([columns, *bent]))

    def response_to(self, moves: Sequence[FloatArray]) -> FloatArray:
        """(n,) response of the fitted plant to further moves of the command, one array a run."""
        shape, dead_time = self.problem.split(self.theta)
        modes = self.problem.modes(shape)
        parts = [
            response(modes, replace(grid, moved=moved), dead_time)[run.valid]
            for run, grid, moved in zip(self.problem.runs, self.problem.grids, moves, strict=True)
        ]
        return np.asarray(self.gain_of_plant * np.concatenate(parts))

    def held_back(self, band: float, short: float | None = None) -> FloatArray:
        """(n,) what a valve takes off the response."""
        rest = band if short is None else short
        return self.response_to([_through(run, band, rest) - run.command for run in self.problem.runs])

    def gain(self, column: FloatArray, colours: Sequence[Colour]) -> tuple[float, float, Colour]:
        """Rise of twice the log likelihood by a column that may only add, its coefficient and the best colour."""
        without = min(self._loss(self.base, colour)[0] for colour in colours)
        ends = [self._loss(np.column_stack([column, self.base]), colour) for colour in colours]
        best = int(np.argmin([end[0] for end in ends]))
        loss, coefficient = ends[best]
        return without - loss if coefficient > 0.0 else 0.0, coefficient, colours[best]

    def _loss(self, columns: FloatArray, colour: Colour) -> tuple[float, float]:
        """-2 log likelihood up to a constant, and the coefficient of the first column."""
        whitener = self.whitener(colour)
        white = whitener.apply(np.column_stack([columns, self.residual]))
        solved = projected(white[:, 1:-1], white[:, -1])
        clear = solved.cleared(white[:, :1])[:, 0]
        power = max(float(clear @ clear), 1e-300)
        along = float(clear @ solved.solved.residual)
        cost = max(solved.solved.cost - along**2 / power, 1e-300)
        n = len(self.residual)
        return n * float(np.log(cost)) + whitener.log_determinant, along / power

    def whitener(self, colour: Colour) -> Whitener:
        """Under which the noise of this colour is white."""
        return Whitener(self.problem.stretches, colour, self.problem.waves)

    def sized(self, colour: Colour, sureness: float, first: float) -> Sticking:
        """The valve's numbers by the exact response, where it rested before each record left open within the band."""
        sizes = self._sizes(colour)
        profiles = [self._profiled(size, first) for size in sizes]
        chosen = int(np.argmin([profile[2] for profile in profiles]))
        size, (short, error, _) = sizes[chosen], profiles[chosen]
        edges = np.linspace(LEAST_SHARE, 1.0, _SHARES + 1)
        shares = 0.5 * (edges[1:] + edges[:-1])
        play = [_through(run, short, short) for run in self.problem.runs]
        losses, shorts = np.zeros(_SHARES), np.full(_SHARES, short)
        at_play = size.loss(short, short)
        for i, share in enumerate(shares):
            held = [_through(run, short / share, short) for run in self.problem.runs]
            if not all(np.array_equal(a, b) for a, b in zip(play, held, strict=True)):
                tries = short * np.linspace(0.4, 1.1, 8)
                values = [size.loss(each / share, each) for each in tries]
                shorts[i] = tries[int(np.argmin(values))]
                losses[i] = min(values) - at_play
        # a plant that is not quite the fitted one weighs as much here: only what matters beside the whole rise counts
        weights = np.exp(-0.5 * (losses - losses.min()) * min(_SURE / sureness, 1.0))
        best = int(np.argmin(losses))
        plain = losses[best] > -1.0
        valve = Valve(short, short) if plain else Valve(float(shorts[best] / shares[best]), float(shorts[best]))
        return Sticking(valve, error, shorts, shares, weights / weights.sum(), sureness)

    def _sizes(self, colour: Colour) -> list[ValveSize]:
        offsets = np.column_stack([self._offset(i) for i in range(len(self.problem.runs))])
        own, bends = self.base[:, :-_BENDS], self.base[:, -_BENDS:]
        return valve_sizes(self.whitener(colour), self.held_back, self.residual, own, bends, offsets)

    def _profiled(self, size: ValveSize, first: float) -> tuple[float, float, float]:
        """Half width of the best play, its standard error and the least loss, from the likelihood along it.

        It is looked for about the first-order one, where that is small enough to be believed.
        """
        believed = first < _BELIEVED * self.span
        ends = (0.25 * first, 3.0 * first) if believed else (_REACH[0] * self.span, _REACH[1] * self.span)
        grid = np.geomspace(*ends, _COARSE)
        least = np.inf
        for _ in range(4):
            losses = np.array([size.loss(each, each) for each in grid])
            place = int(np.argmin(losses))
            least = min(least, float(losses[place]))
            near = losses < losses[place] + 9.0
            if near.sum() > _FINE // 2:
                break
            ends = grid[max(np.flatnonzero(near)[0] - 1, 0)], grid[min(np.flatnonzero(near)[-1] + 1, len(grid) - 1)]
            grid = np.linspace(*ends, _FINE)
        weights = np.exp(-0.5 * (losses - losses.min())) * np.gradient(grid)
        weights /= weights.sum()
        middle = float(weights @ grid)
        return middle, float(np.sqrt(weights @ (grid - middle) ** 2)), least

    def _offset(self, i: int) -> FloatArray:
        """(n,) effect, per command, of a valve that did not stand where the command did before run i."""
        moves = [np.zeros(len(run.command)) for run in self.problem.runs]
        run = self.problem.runs[i]
        moves[i][run.command != run.start_command] = 1.0
        moved = np.maximum.accumulate(moves[i])
        moves[i] = moved
        return self.response_to(moves)


def _bent(run: Run, reference: float, span: float, power: int) -> FloatArray:
    """(n,) how a power of the command, in shares of its movement, has changed since before the record."""
    rest = ((run.start_command - reference) / span) ** power
    return np.asarray(((run.command - reference) / span) ** power - rest)


def _through(run: Run, band: float, short: float) -> FloatArray:
    return through_valve(run.command, run.start_command, band, short)
