"""Draws from a profile: parameters that the record leaves plausible."""

import numpy as np
from scipy.stats import chi2, norm, qmc

from .profile import Profile
from .run import FloatArray


def draw(profile: Profile, count: int, seed: int = 0) -> FloatArray:
    """(count, s + 1 + q) draws: log shapes, dead time in s, linear coefficients.

    The dead time comes from its mixed density, the rest from a Student t about its best at that dead time. The points
    are a scrambled Sobol sequence, so that a thousand of them fill the distribution evenly.
    """
    at = _points(profile, profile.centres.shape[1] + 2, count, seed)
    dead_time = _dead_times(profile, at[:, 0])
    spread = np.sqrt(profile.variance * profile.freedom / chi2.ppf(at[:, 1], profile.freedom))
    centre, cell = _along(profile, dead_time)
    rest = centre + spread[:, None] * np.einsum("nij,nj->ni", profile.factors[cell], norm.ppf(at[:, 2:]))
    shapes = profile.shape_count
    return np.column_stack([rest[:, :shapes], dead_time, rest[:, shapes:]])


def propose(profile: Profile, count: int, seed: int, widen: float) -> tuple[FloatArray, FloatArray]:
    """Log shapes and dead times alone, (count, s + 1), and their log density, (count,).

    The shapes' spread is `widen` times that of the record.
    """
    shapes = profile.shape_count
    at = _points(profile, shapes + 2, count, seed)
    dead_time = _dead_times(profile, at[:, 0])
    spread = widen * np.sqrt(profile.variance * profile.freedom / chi2.ppf(at[:, 1], profile.freedom))
    centre, cell = _along(profile, dead_time)
    covariance = profile.factors[:, :shapes] @ profile.factors[:, :shapes].transpose(0, 2, 1)
    roots = np.linalg.cholesky(covariance)
    normal = norm.ppf(at[:, 2:])
    theta = np.column_stack(
        [centre[:, :shapes] + spread[:, None] * np.einsum("nij,nj->ni", roots[cell], normal), dead_time]
    )
    distance = (spread / (widen * np.sqrt(profile.variance))) ** 2 * np.sum(normal**2, axis=1)
    volume = np.sum(np.log(np.diagonal(roots, axis1=1, axis2=2)), axis=1)[cell]
    tail = -0.5 * (profile.freedom + shapes) * np.log1p(distance / profile.freedom) - volume
    along = np.interp(dead_time, profile.dead_times, profile.log_weights - profile.log_weights.max())
    return theta, tail + (along if len(profile.dead_times) > 1 else 0.0)


def _points(profile: Profile, dimensions: int, count: int, seed: int) -> FloatArray:
    points = qmc.Sobol(dimensions, seed=seed).random(1 << int(np.ceil(np.log2(count))))[:count]
    return np.clip(points, 1e-9, 1 - 1e-9)


def _along(profile: Profile, dead_time: FloatArray) -> tuple[FloatArray, np.ndarray]:
    """Conditional centres at these dead times, and the nearest grid point of each."""
    centre = np.column_stack([np.interp(dead_time, profile.dead_times, column) for column in profile.centres.T])
    return centre, np.abs(profile.dead_times[:, None] - dead_time[None, :]).argmin(axis=0)


def _dead_times(profile: Profile, uniform: FloatArray) -> FloatArray:
    grid = profile.dead_times
    if len(grid) == 1:
        return np.full(len(uniform), grid[0])
    density = np.exp(profile.log_weights - profile.log_weights.max())
    area = np.concatenate([[0.0], np.cumsum(0.5 * (density[1:] + density[:-1]) * np.diff(grid))])
    cell = np.clip(np.searchsorted(area, uniform * area[-1], side="right") - 1, 0, len(grid) - 2)
    left, right = density[cell], density[cell + 1]
    width = np.diff(grid)[cell]
    rest = uniform * area[-1] - area[cell]
    slope = (right - left) / width
    root = np.sqrt(np.maximum(left**2 + 2 * slope * rest, 0.0))
    step = np.where(left + root > 0, 2 * rest / np.maximum(left + root, 1e-300), 0.0)
    return np.asarray(grid[cell] + np.clip(step, 0.0, width))
