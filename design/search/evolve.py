"""A small evolution strategy with an adapted covariance: derivative-free, batched, seeded."""

from collections.abc import Callable

import numpy as np

from ...ident.run import FloatArray

Objective = Callable[[FloatArray], FloatArray]


def evolve(
    worth: Objective,
    start: FloatArray,
    spread: FloatArray,
    *,
    generations: int,
    population: int,
    seed: int,
) -> tuple[FloatArray, float]:
    """Raise `worth` from `start`; give the best point seen and its worth.

    Parameters
    ----------
    worth : callable
        (g, k) points to (g,) values; the larger the better.
    start, spread : (k,) arrays
        First mean and standard deviations.

    References
    ----------
    Hansen and Ostermeier, Evolutionary Computation 9 (2001) 159-195, rank-one and rank-mu update; from memory.
    """
    rng = np.random.default_rng(seed)
    k, half = start.size, population // 2
    weights = np.log(half + 0.5) - np.log(np.arange(1, half + 1))
    weights /= weights.sum()
    effective = 1.0 / np.sum(weights**2)
    step_rate = (effective + 2) / (k + effective + 5)
    path_rate = 4.0 / (k + 4)
    one = 2.0 / ((k + 1.3) ** 2 + effective)
    many = min(1 - one, 2 * (effective - 2 + 1 / effective) / ((k + 2) ** 2 + effective)) if effective > 1 else 0.0
    usual = np.sqrt(k) * (1 - 1 / (4 * k) + 1 / (21 * k * k))
    mean, size, shape = start.copy(), 1.0, np.eye(k)
    size_path, shape_path = np.zeros(k), np.zeros(k)
    best, best_worth = start.copy(), float(worth(start[None])[0])
    for _ in range(generations):
        values, vectors = np.linalg.eigh(shape)
        root = vectors * np.sqrt(np.maximum(values, 1e-12))
        drawn = rng.standard_normal((population, k)) @ root.T
        points = mean + size * drawn * spread
        found = worth(points)
        order = np.argsort(-found, kind="stable")
        if found[order[0]] > best_worth:
            best, best_worth = points[order[0]].copy(), float(found[order[0]])
        elite = drawn[order[:half]]
        move = weights @ elite
        mean = mean + size * move * spread
        whitened = vectors @ ((vectors.T @ move) / np.sqrt(np.maximum(values, 1e-12)))
        size_path = (1 - step_rate) * size_path + np.sqrt(step_rate * (2 - step_rate) * effective) * whitened
        shape_path = (1 - path_rate) * shape_path + np.sqrt(path_rate * (2 - path_rate) * effective) * move
        size *= np.exp(np.clip(step_rate * (np.linalg.norm(size_path) / usual - 1), -0.6, 0.6))
        shape = (1 - one - many) * shape + one * np.outer(shape_path, shape_path)
        shape += many * (elite.T * weights) @ elite
        if size * np.sqrt(shape.diagonal().max()) < 2e-3:
            break
    return best, best_worth
