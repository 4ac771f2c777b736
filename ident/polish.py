"""Damped Gauss-Newton on the projected residual: from a first guess to the bottom of its valley."""

import numpy as np
from numpy.typing import NDArray

from .regression import Regression, Solved
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
    return np.array([*low, problem.soonest]), np.array([*high, 0.9 * length])


def jacobian(
    problem: Regression, theta: FloatArray, here: Solved, colour: Colour, free: NDArray[np.bool_]
) -> FloatArray:
    """(n, f) differences of the projected whitened residual over the free parameters.

    The way down needs no better than forward differences: where it ends is decided by the cost alone.
    """
    columns = [
        (problem.solve(theta + step, colour).residual - here.residual) / float(step.sum())
        for i, step in enumerate(problem.steps(theta))
        if free[i]
    ]
    return np.column_stack(columns) if columns else np.zeros((len(problem.measured), 0))


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

    Returns
    -------
    theta, Solved
        The end point and its linear part. `tolerance` is relative, on the cost.
    """
    low, high = bounds_of(problem)
    theta = np.clip(theta, low, high)
    free = np.ones(len(theta), dtype=bool)
    free[-1] = not (hold_dead_time or problem.jumps)
    best = problem.solve(theta, colour)
    if not free.any():
        return theta, best
    damping = 1e-3
    reach = np.array([1.5] * (len(theta) - 1) + [high[-1]])
    for _ in range(rounds):
        slope = jacobian(problem, theta, best, colour, free)
        normal, pull = slope.T @ slope, slope.T @ best.residual
        size = np.diag(normal).copy()
        size[size == 0] = 1.0
        improved = False
        for _ in range(7):
            step = -np.linalg.solve(normal + damping * np.diag(size), pull)
            trial = theta.copy()
            trial[free] = theta[free] + np.clip(step, -reach[free], reach[free])
            trial = np.clip(trial, low, high)
            solved = problem.solve(trial, colour)
            if solved.cost < best.cost:
                improved = True
                break
            damping *= 6
        if not improved:
            break
        gain = best.cost - solved.cost
        theta, best = trial, solved
        damping = max(damping / 8, 1e-9)
        if gain < tolerance * best.cost:
            break
    return theta, best
