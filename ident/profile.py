"""What the record says about the dead time: the whitened cost along it, the other parameters solved at each point.

The corner of a held step, once whitened, is a spike, and a cost linearised in the dead time says nothing true about its
width. So the cost is followed along a grid, and the plausible dead times are mixed by their likelihood.
"""

from dataclasses import dataclass

import numpy as np

from .polish import bounds_of, polish
from .projected import root_of_covariance
from .regression import Regression
from .run import FloatArray
from .whiten import Colour

# Beyond this fall of twice the log likelihood nothing is drawn: a share of 1e-4 in a normal tail.
_REACH = 16.0
# Variance of an even distribution of width one: what the bounds alone leave open of a shape the record is blind to.
_EVEN = 1.0 / 12.0


@dataclass(frozen=True, eq=False)
class Profile:
    """Conditional solutions along the dead time.

    Attributes
    ----------
    dead_times : (m,) array, s, increasing
    log_weights : (m,) array
        Log density of the dead time, up to a constant.
    centres : (m, s + q) array
        Log shapes and linear coefficients that are best at each dead time.
    factors : (m, s + q, s + q) array
        Square roots of the conditional covariance for unit innovation variance.
    variance : float
        Innovation variance at the best point.
    freedom : float
    linear_count : int
        q, the number of linear coefficients.
    """

    dead_times: FloatArray
    log_weights: FloatArray
    centres: FloatArray
    factors: FloatArray
    variance: float
    freedom: float
    linear_count: int

    @property
    def shape_count(self) -> int:
        """s, the number of shapes."""
        return int(self.centres.shape[1]) - self.linear_count


def profile_dead_time(
    problem: Regression, theta: FloatArray, colour: Colour, freedom: float, points: int = 27
) -> Profile:
    """Follow the cost along the dead time from a fitted theta.

    Parameters
    ----------
    freedom : float
        Degrees of freedom of the noise's size; the density falls off as Student's t.
    """
    solved = problem.solve(theta, colour)
    unknowns = len(theta) + len(solved.coefficients)
    variance = solved.cost / max(len(problem.measured) - unknowns, 1)
    low, high = _reach(problem, theta, colour, variance)
    grid = _with_best(np.linspace(low, high, points), theta[-1])
    costs, thetas = _costs_along(problem, theta, colour, grid)
    near = costs - costs.min() <= _REACH * variance
    if near.sum() < points // 3:
        inside = np.flatnonzero(near)
        a, b = grid[max(inside[0] - 1, 0)], grid[min(inside[-1] + 1, len(grid) - 1)]
        best = thetas[int(np.argmin(costs))]
        grid = _with_best(np.linspace(a, b, points), best[-1])
        costs, thetas = _costs_along(problem, best, colour, grid)
    variance = costs.min() / max(len(problem.measured) - unknowns, 1)
    return _with_conditionals(problem, thetas, costs, colour, variance, freedom)


def _with_best(grid: FloatArray, best: float) -> FloatArray:
    return np.unique(np.concatenate([grid, [best]]))


def _reach(problem: Regression, theta: FloatArray, colour: Colour, variance: float) -> tuple[float, float]:
    """Dead times on both sides at which the cost has risen past the reach."""
    floor, ceiling = bounds_of(problem)
    best = problem.solve(theta, colour).cost
    ends = []
    for sign, edge in ((-1.0, floor[-1]), (1.0, ceiling[-1])):
        step = 0.25 * problem.interval
        at = theta.copy()
        while True:
            nearer = sign * (edge - at[-1]) <= 0
            if nearer:
                break
            at[-1] = np.clip(at[-1] + sign * step, floor[-1], ceiling[-1])
            at, solved = polish(problem, at, colour, hold_dead_time=True, rounds=2)
            if solved.cost - best > _REACH * variance:
                break
            step *= 1.6
        ends.append(float(at[-1]))
    return ends[0], ends[1]


def _costs_along(
    problem: Regression, theta: FloatArray, colour: Colour, grid: FloatArray
) -> tuple[FloatArray, list[FloatArray]]:
    start = int(np.argmin(np.abs(grid - theta[-1])))
    costs = np.empty(len(grid))
    thetas: list[FloatArray] = [theta] * len(grid)
    for path in (range(start, len(grid)), range(start - 1, -1, -1)):
        at = theta.copy()
        for i in path:
            at = at.copy()
            at[-1] = grid[i]
            at, solved = polish(problem, at, colour, hold_dead_time=True, rounds=2, tolerance=1e-6)
            costs[i], thetas[i] = solved.cost, at
    return costs, thetas


def _with_conditionals(
    problem: Regression,
    thetas: list[FloatArray],
    costs: FloatArray,
    colour: Colour,
    variance: float,
    freedom: float,
) -> Profile:
    centres, factors, log_volumes = [], [], []
    bounds = _bounds_as_rows(problem, variance)
    for theta in thetas:
        solved = problem.solve(theta, colour)
        here = problem.at(theta)
        slopes = here.slopes_under(solved.coefficients, colour)[:, :-1]
        white = np.column_stack([slopes, here.columns_under(colour)])
        wide = np.pad(bounds, ((0, 0), (0, len(solved.coefficients))))
        factor, log_volume = root_of_covariance(np.vstack([white, wide]))
        centres.append(np.concatenate([theta[:-1], solved.coefficients]))
        factors.append(factor)
        log_volumes.append(log_volume)
    rise = (costs - costs.min()) / variance
    log_density = -0.5 * (freedom + 1) * np.log1p(rise / freedom) + np.array(log_volumes)
    grid = np.array([theta[-1] for theta in thetas])
    linear_count = len(solved.coefficients)
    return Profile(grid, log_density, np.array(centres), np.array(factors), float(variance), freedom, linear_count)


def _bounds_as_rows(problem: Regression, variance: float) -> FloatArray:
    """(s, s) rows that say no more than that each log shape lies between its bounds.

    A friction far too small to be felt, or a lag far below a sample, leaves no trace in the record; without these rows
    its logarithm would spread over thousands of decades.
    """
    low, high = bounds_of(problem)
    return np.diag(np.sqrt(variance / _EVEN) / (high[:-1] - low[:-1]))
