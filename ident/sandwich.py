"""Covariance of plain least squares under coloured noise.

Wider than a whitened fit's, and safe when the model is not quite the plant.
"""

import numpy as np
from scipy.linalg import matmul_toeplitz
from scipy.stats import chi2, norm, qmc

from .run import FloatArray
from .whiten import Colour


def autocovariance(colour: Colour, count: int) -> FloatArray:
    """(count,) autocovariance of the noise in units of w's variance, lags 0, 1, ..."""
    first = (1 + colour.rho * colour.c) * (colour.rho + colour.c) / (1 - colour.rho**2)
    tail = first * np.power(colour.rho, np.arange(max(count - 1, 0)))
    return np.concatenate([[colour.variance_ratio], tail])[:count]


def sandwich_covariance(
    columns: FloatArray,
    residual: FloatArray,
    stretches: list[slice],
    colour: Colour,
    waves: FloatArray | None = None,
) -> FloatArray:
    """(q, q) covariance of the least-squares coefficients of `columns` under noise of this colour.

    The noise's size comes from the residual, corrected for what the columns took out of it.

    References
    ----------
    White, H., Econometrica 48 (1980) 817-838, in the form for a known colour (from memory).
    """
    spread = np.empty_like(columns)
    for part in stretches:
        gamma = autocovariance(colour, part.stop - part.start)
        spread[part] = matmul_toeplitz(gamma, columns[part])
    gram, squares = columns.T @ columns, float(residual @ residual)
    if waves is None:
        return sandwiched(gram, columns.T @ spread, None, 0.0, squares, len(residual), colour)
    power = float(np.mean(np.einsum("ij,ij->i", waves, waves)))
    return sandwiched(gram, columns.T @ spread, waves.T @ columns, power, squares, len(residual), colour)


def sandwiched(
    gram: FloatArray,
    meat: FloatArray,
    along_waves: FloatArray | None,
    wave_power: float,
    squares: float,
    n: int,
    colour: Colour,
) -> FloatArray:
    """`sandwich_covariance` from sums over the samples.

    Parameters
    ----------
    gram, meat : (q, q) arrays
        X' X, and X' V X with V the covariance of the fast noise in units of w's variance.
    along_waves : (k, q) array or None
        The slow waves' products with the columns.
    wave_power : float
        Mean square of a sample of all waves together.
    squares : float
        Sum of squares of the residual of n samples.
    """
    scale = np.sqrt(np.diag(gram))
    scale[scale == 0] = 1.0
    ratio = colour.variance_ratio
    if along_waves is not None and colour.wander > 0.0:
        meat = meat + colour.wander * along_waves.T @ along_waves
        ratio += colour.wander * wave_power
    sizes, vectors = np.linalg.eigh(gram / np.outer(scale, scale))
    bread = (vectors / np.maximum(sizes, 1e-12 * sizes[-1])) @ vectors.T
    inner = meat / np.outer(scale, scale)
    taken = float(np.trace(bread @ inner))
    size = squares / max(n * ratio - taken, 0.05 * n)
    return np.asarray(size * bread @ inner @ bread / np.outer(scale, scale))


def grouped_autocovariance(colour: Colour, size: int, count: int) -> FloatArray:
    """(count,) covariances of sums over `size` samples with sums 0, 1, ... groups later, in units of w's variance.

    With gamma(l) = gamma(1) rho^(l - 1): size gamma(0) + 2 sum_l (size - l) gamma(l), and
    gamma(1) rho^((m - 1) size) S^2 with S = 1 + rho + ... + rho^(size - 1).
    """
    lags = np.arange(1, size)
    first = (1 + colour.rho * colour.c) * (colour.rho + colour.c) / (1 - colour.rho**2)
    own = size * colour.variance_ratio + 2 * float(np.sum((size - lags) * first * np.power(colour.rho, lags - 1)))
    total = float(np.sum(np.power(colour.rho, np.arange(size))))
    tail = first * total**2 * np.power(colour.rho, size * np.arange(max(count - 1, 0)))
    return np.concatenate([[own], tail])[:count]


def draw_normal(centre: FloatArray, covariance: FloatArray, freedom: float, count: int, seed: int) -> FloatArray:
    """(count, q) evenly filled draws of a Student t about `centre`."""
    q = len(centre)
    points = qmc.Sobol(q + 1, seed=seed).random(1 << int(np.ceil(np.log2(count))))[:count]
    points = np.clip(points, 1e-9, 1 - 1e-9)
    spread = np.sqrt(freedom / chi2.ppf(points[:, 0], freedom))
    scale = _scales(covariance)
    sizes, vectors = np.linalg.eigh(covariance / np.outer(scale, scale))
    root = vectors * np.sqrt(np.maximum(sizes, 0.0))
    normal = norm.ppf(points[:, 1:]) @ root.T * scale
    return np.asarray(centre + spread[:, None] * normal)


def _scales(covariance: FloatArray) -> FloatArray:
    out = np.sqrt(np.maximum(np.diag(covariance), 0.0))
    out[out == 0] = 1.0
    return out
