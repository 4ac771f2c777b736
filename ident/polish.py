"""Damped Gauss-Newton on the projected residual: from a first guess to the bottom of its valley."""

import numpy as np

from .projected import Solved
from .regression import Regression
from .run import FloatArray
from .whiten import WHITE, Colour


def bounds_of(problem: Regression) -> tuple[FloatArray, FloatArray]:
    """Lowest and highest theta: log shapes and dead time."""
    dt, length = problem.interval, problem.duration
    low, high = [], []
    for shape in problem.structure.shapes:
        if shape.kind == "time":
            edge = (0.02 * dt, 30 * length)
        elif shape.kind == "frequency":
            edge = (0.03 / length, 0.9 * np.pi / dt)
        elif shape.kind == "command":
            edge = (1e-4 * problem.span, 0.95 * problem.span)
        else:
            edge = (1e-3, 1e2)
        low.append(np.log(edge[0]))
        high.append(np.log(edge[1]))
    return np.array([*low, problem.soonest]), np.array([*high, problem.latest])


def polish(
    problem: Regression,
    theta: FloatArray,
    colour: Colour = WHITE,
    *,
    hold_dead_time: bool = False,
    rounds: int = 25,
    tolerance: float = 1e-7,
) -> tuple[FloatArray, Solved]:
    """Walk down from theta; the cost never rises.

    The dead time of a response that jumps stays where it is: no sample tells where between two samples the jump was.
    What stands at a bound and would go beyond it stays there while the others move: a joint step, clipped, would end
    beside the bottom. The slopes are those of the model at the best linear part, cleared of the columns.

    Returns
    -------
    theta, Solved
        The end point and its linear part. `tolerance` is relative, on the cost.

    References
    ----------
    Kaufman, L., BIT 15 (1975) 49-57: variable projection without the slopes of the projection (from memory).
    Bertsekas, D. P., SIAM J. Control Optim. 20 (1982) 221-246: steps under simple bounds (from memory).
    """
    low, high = bounds_of(problem)
    theta = np.clip(theta, low, high)
    moving = np.arange(len(theta) - int(hold_dead_time or problem.jumps))
    here = problem.at(theta)
    best = problem.solve_at(here, colour)
    damping = 1e-3
    reach = np.array([1.5] * (len(theta) - 1) + [high[-1]])
    for _ in range(rounds):
        if not len(moving):
            break
        slope = best.cleared(here.slopes_under(best.solved.coefficients, colour, rough=True)[:, moving])
        pull = slope.T @ best.solved.residual
        inside = np.where(pull < 0, theta[moving] > low[moving], theta[moving] < high[moving])
        if not inside.any():
            break
        free, slope, pull = moving[inside], slope[:, inside], pull[inside]
        normal = slope.T @ slope
        size = np.diag(normal).copy()
        size[size == 0] = 1.0
        improved = False
        for _ in range(7):
            step = np.linalg.solve(normal + damping * np.diag(size), pull)
            trial = theta.copy()
            trial[free] = theta[free] + np.clip(step, -reach[free], reach[free])
            trial = np.clip(trial, low, high)
            there = problem.at(trial)
            found = problem.solve_at(there, colour)
            if found.solved.cost < best.solved.cost:
                improved = True
                break
            damping *= 6
        if not improved:
            break
        gain = best.solved.cost - found.solved.cost
        theta, here, best = trial, there, found
        damping = max(damping / 8, 1e-9)
        if gain < tolerance * best.solved.cost:
            break
    return theta, best.solved
