"""First guesses for long records of steps: averages over the whole record, then ever closer views of a step."""

from dataclasses import dataclass, field, replace

import numpy as np

from .catalogue import Structure
from .condensed import can_condense, condensed, take_over
from .polish import polish
from .projected import Solved
from .regression import Regression
from .run import FloatArray, Run
from .start import first_guesses
from .whiten import WHITE, Colour

# Samples of one view, and how much closer each is than the one before.
_VIEW = 3000
_CLOSER = 16
_SCOUT = 9
_ROUNDS = 4
# Standard errors of the dead time that are kept sample by sample.
_REACH = 12.0
# Samples that a dead time is followed over at most without laying out the blocks anew.
_FARTHEST = 500.0
# Rad, or time constants, that a mode may turn or pass in one sample of the view that finds it.
_SLOW = 0.1


@dataclass(frozen=True, eq=False)
class LongRecord:
    """Runs whose structures are all fitted through few rows.

    Attributes
    ----------
    base : Regression
        Of any structure: what does not depend on it is taken from here.
    views : list of tuple of Run
        The whole record averaged, then stretches round its largest steps, each averaged less.
    shared : dict
        See `Condensed`.
    """

    base: Regression
    views: list[tuple[Run, ...]]
    shared: dict[Colour, FloatArray] = field(default_factory=dict)

    def fit(self, structure: Structure) -> tuple[Regression, FloatArray, Solved]:
        """The structure at its bottom under white noise, from the best of all views.

        A closer view is taken as long as the plant found so far is hardly slower than the last one could show.
        """
        whole = replace(self.base, structure=structure)
        take_over(whole, self.base)
        ends = []
        for view in self.views:
            ends.append(self._settled(whole, *self._guess(view, structure)))
            if _seen_well(*ends[-1][:2], float(view[0].time[1] - view[0].time[0])):
                break
        return min(ends, key=lambda end: end[2].cost)

    def _guess(self, view: tuple[Run, ...], structure: Structure) -> tuple[FloatArray, float]:
        """Theta and a reach of the dead time, s, that surely holds the best one if this view sees it."""
        problem = Regression(view, structure, self.base.reference, self.base.fixed_command)
        ends = [polish(problem, guess, rounds=_SCOUT) for guess in first_guesses(problem)]
        theta, solved = min(ends, key=lambda end: end[1].cost)
        # a structure that fits badly has no sure dead time: what is beyond the reach it finds step by step
        least, most = 2.0 * problem.interval, _FARTHEST * self.base.interval
        return theta, max(least, min(_REACH * dead_time_error(problem, theta, solved), most))

    def _settled(self, whole: Regression, theta: FloatArray, reach: float) -> tuple[Regression, FloatArray, Solved]:
        for _ in range(_ROUNDS):
            problem = condensed(whole, theta, reach, self.shared)
            theta, solved = polish(problem, theta)
            if not hasattr(problem, "near"):
                break
            error = dead_time_error(problem, theta, solved)
            closer = min(max(4.0, _REACH * error / whole.interval), _FARTHEST) * whole.interval
            if problem.near(theta) and closer > 0.5 * reach:
                break
            reach = closer
        return problem, theta, solved


def _seen_well(problem: Regression, theta: FloatArray, interval: float) -> bool:
    """Whether everything about this plant is slow on this scale, s."""
    modes = problem.modes(problem.split(theta)[0])
    quickest = float(np.max(np.abs(modes.poles), initial=0.0))
    return not problem.jumps and bool(quickest * interval < _SLOW) and bool(quickest or theta[-1] > interval)


def dead_time_error(problem: Regression, theta: FloatArray, solved: Solved) -> float:
    """Standard error of the dead time under white noise, s."""
    if problem.jumps:
        return 0.0
    found = problem.solve_at(problem.at(theta), WHITE)
    slopes = found.cleared(problem.at(theta).slopes_under(solved.coefficients, WHITE, rough=True))
    information = np.linalg.pinv(slopes.T @ slopes / max(float(np.max(np.sum(slopes**2, axis=0))), 1e-300))
    size = solved.cost / max(len(problem.measured), 1) / max(float(np.max(np.sum(slopes**2, axis=0))), 1e-300)
    return float(np.sqrt(max(information[-1, -1] * size, 0.0)))


def long_record(problem: Regression) -> LongRecord | None:
    """The runs seen at every scale; None where they are short, or no record of steps."""
    if not can_condense(problem):
        return None
    total = sum(len(run.time) for run in problem.runs)
    factor = max(total // _VIEW, 1)
    views = [tuple(_averaged(run, factor) for run in problem.runs)]
    while factor > 1:
        factor = max(factor // _CLOSER, 1)
        views.append(tuple(_near_largest_step(run, factor, _VIEW // len(problem.runs)) for run in problem.runs))
    return LongRecord(problem, views)


def _averaged(run: Run, factor: int) -> Run:
    """Every `factor`-th sample, each the average about it; the command the average until the next."""
    if factor == 1:
        return run
    count = len(run.time) // factor
    centre = np.arange(count) * factor
    response = _means(run.response, centre - factor // 2, factor)
    command = _means(run.command, centre, factor)
    return replace(
        run, time=run.time[centre], command=command, response=response, setpoint=None, command_before=run.start_command
    )


def _means(values: FloatArray, first: np.ndarray, factor: int) -> FloatArray:
    """Means over `factor` values from each of these on, fewer at the ends; lost ones are left out."""
    known = np.isfinite(values)
    sums = np.concatenate([[0.0], np.cumsum(np.where(known, values - np.nanmean(values), 0.0))])
    counts = np.concatenate([[0], np.cumsum(known)])
    low, high = np.maximum(first, 0), np.minimum(first + factor, len(values))
    seen = counts[high] - counts[low]
    means = np.where(seen > 0, (sums[high] - sums[low]) / np.maximum(seen, 1), np.nan)
    return np.asarray(means + np.nanmean(values))


def _near_largest_step(run: Run, factor: int, samples: int) -> Run:
    """So many averages from a little before the run's largest step on."""
    change = np.abs(np.diff(run.command, prepend=run.start_command))
    first = max(int(np.argmax(change)) - factor * samples // 8, 0)
    part = slice(first, min(first + factor * samples, len(run.time)))
    setting = float(run.command[first - 1]) if first else run.start_command
    cut = replace(
        run,
        time=run.time[part],
        command=run.command[part],
        response=run.response[part],
        setpoint=None,
        command_before=setting,
    )
    return _averaged(cut, factor)
