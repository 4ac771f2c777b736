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
    shapes_and_linear = profile.centres.shape[1]
    with_noise = qmc.Sobol(shapes_and_linear + 2, seed=seed).random(1 << int(np.ceil(np.log2(count))))[:count]
    uniform = np.clip(with_noise, 1e-9, 1 - 1e-9)
    dead_time = _dead_times(profile, uniform[:, 0])
    spread = np.sqrt(profile.variance * profile.freedom / chi2.ppf(uniform[:, 1], profile.freedom))
    normal = norm.ppf(uniform[:, 2:])
    at = np.abs(profile.dead_times[:, None] - dead_time[None, :]).argmin(axis=0)
    centre = np.column_stack([np.interp(dead_time, profile.dead_times, column) for column in profile.centres.T])
    rest = centre + spread[:, None] * np.einsum("nij,nj->ni", profile.factors[at], normal)
    shapes = int(rest.shape[1]) - profile.linear_count
    return np.column_stack([rest[:, :shapes], dead_time, rest[:, shapes:]])


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
