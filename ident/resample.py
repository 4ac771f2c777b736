"""Draws by what the record says at each of them, not by a normal law about the best fit.

Given shapes and dead time the rest of the model is linear, and what the record leaves open of it is exactly normal. So
only the shapes and the dead time are proposed; each is weighed by the whitened cost there, and the linear part is drawn
about its own solution at that very point.
"""

import numpy as np
from scipy.stats import chi2, norm, qmc
from scipy.stats import f as fisher

from .draw import draw, propose
from .polish import bounds_of
from .profile import Profile
from .projected import Solved
from .regression import Regression
from .run import FloatArray
from .whiten import Colour

# Shapes known better than this (standard deviation of the logarithm) are drawn from the normal law as it is.
_SURE = 0.02
_WIDEN = 1.25
_POINTS = 384


def resampled(problem: Regression, profile: Profile, colour: Colour, count: int, seed: int) -> FloatArray:
    """(count, s + 1 + q) draws: log shapes, dead time in s, linear coefficients.

    References
    ----------
    Rubin, D. B., sampling/importance resampling, in Bayesian Statistics 3 (1988) 395-402 (from memory).
    """
    plain = draw(profile, count, seed)
    shapes = profile.shape_count
    if not shapes or np.all(np.std(plain[:, :shapes], axis=0) < _SURE):
        return plain
    theta, log_density = propose(profile, _POINTS, seed, _WIDEN)
    low, high = bounds_of(problem)
    inside = np.all((theta >= low) & (theta <= high), axis=1)
    found = [problem.conditional(point, colour) for point in theta[inside]]
    costs = np.array([solved.cost for solved, _, _ in found])
    volumes = np.array([volume for _, _, volume in found])
    k = theta.shape[1]
    rise = np.maximum(costs - costs.min(), 0.0) / profile.variance
    log_weight = -0.5 * (profile.freedom + k) * np.log1p(rise / profile.freedom) + volumes - log_density[inside]
    possible = rise <= k * float(fisher.ppf(0.999, k, profile.freedom))
    weight = np.where(possible, np.exp(log_weight - log_weight[possible].max()), 0.0)
    picked = _systematic(weight, count)
    points = theta[inside][picked]
    linear = _linear(found, picked, profile, seed)
    return np.column_stack([points, linear])


def _linear(
    found: list[tuple[Solved, FloatArray, float]], picked: np.ndarray, profile: Profile, seed: int
) -> FloatArray:
    q = profile.linear_count
    points = np.clip(
        qmc.Sobol(q + 1, seed=seed + 1).random(1 << int(np.ceil(np.log2(len(picked)))))[: len(picked)], 1e-9, 1 - 1e-9
    )
    spread = np.sqrt(profile.variance * profile.freedom / chi2.ppf(points[:, 0], profile.freedom))
    centre = np.array([solved.coefficients for solved, _, _ in found])[picked]
    roots = np.array([root for _, root, _ in found])[picked]
    return np.asarray(centre + spread[:, None] * np.einsum("nij,nj->ni", roots, norm.ppf(points[:, 1:])))


def _systematic(weight: FloatArray, count: int) -> np.ndarray:
    """Indices, (count,), each point as often as its weight asks, in an order that tells nothing."""
    ends = np.cumsum(weight) / np.sum(weight)
    picked = np.searchsorted(ends, (np.arange(count) + 0.5) / count)
    return np.random.default_rng(0).permutation(np.minimum(picked, len(weight) - 1))
