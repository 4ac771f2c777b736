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
    scale = np.sqrt(np.einsum("ij,ij->j", columns, columns))
    scale[scale == 0] = 1.0
    unit = columns / scale
    spread = np.empty_like(unit)
    for part in stretches:
        gamma = autocovariance(colour, part.stop - part.start)
        spread[part] = matmul_toeplitz(gamma, unit[part])
    ratio = colour.variance_ratio
    if waves is not None and colour.wander > 0.0:
        spread += colour.wander * waves @ (waves.T @ unit)
        ratio += colour.wander * float(np.mean(np.einsum("ij,ij->i", waves, waves)))
    sizes, vectors = np.linalg.eigh(unit.T @ unit)
    bread = (vectors / np.maximum(sizes, 1e-12 * sizes[-1])) @ vectors.T
    meat = unit.T @ spread
    taken = float(np.trace(bread @ meat))
    size = float(residual @ residual) / max(len(residual) * ratio - taken, 0.05 * len(residual))
    return np.asarray(size * bread @ meat @ bread / np.outer(scale, scale))


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
