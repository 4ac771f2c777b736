"""The noise's colour, estimated by restricted maximum likelihood beside the model's own columns."""

from collections.abc import Callable
from dataclasses import replace
from typing import Any

import numpy as np
from scipy.linalg import lapack
from scipy.optimize import minimize

from .run import FloatArray
from .wander import Whitener
from .whiten import Colour

_RHO_MOST = 0.9995
_FIRST_RHO = (0.0, 0.4, 0.7, 0.85, 0.93, 0.97, 0.99)
_FIRST_WANDER = (-1.2, 0.0, 1.2)
# Twice the log likelihood that a wandering level must win: two would be even odds for one more parameter.
_WORTH = 2.0
_FIRST_SHARE = (0.0, 0.5, 0.8, 0.95)


def estimate_colour(
    columns: FloatArray, residual: FloatArray, stretches: list[slice], waves: FloatArray | None = None
) -> Colour:
    """Colour of the residual, free of the bias from fitting the columns.

    Parameters
    ----------
    columns : (n, q) array
        Derivatives of the model in every fitted parameter, at the solution.
    residual : (n,) array
        measured - model, response unit.
    stretches : list of slice
        Consecutive samples; the noise starts afresh in each.
    waves : (n, k) array, optional
        Slow waves; a wandering level is taken up where the likelihood rises enough for it.

    Returns
    -------
    Colour

    References
    ----------
    Harville, D. A., J. Am. Stat. Assoc. 72 (1977) 320-338: restricted likelihood (from memory).
    """
    scaled = columns / np.maximum(np.sqrt(np.einsum("ij,ij->j", columns, columns)), 1e-300)
    both = np.column_stack([scaled, residual])

    def loss(point: FloatArray) -> float:
        return restricted_loss(both, stretches, _colour(point))

    firsts = [np.array([np.arctanh(rho), share]) for rho in _FIRST_RHO for share in (_FIRST_SHARE if rho else (0.0,))]
    values = [loss(point) for point in firsts]
    best = firsts[int(np.argmin(values))]
    point, least = _lowest(loss, best, np.array([0.12, 0.1]), most=90)
    if waves is None:
        return _colour(point)
    return _with_wander(both, stretches, waves, point, least, [firsts[i] for i in np.argsort(values)[:4]])


def _lowest(
    loss: Callable[[FloatArray], float], start: FloatArray, widths: FloatArray, most: int
) -> tuple[FloatArray, float]:
    """Nelder and Mead's simplex from a start: the lowest point and its loss."""
    around = start + np.vstack([np.zeros(len(start)), np.diag(widths)])
    options: Any = {"xatol": 3e-3, "fatol": 2e-2, "maxfev": most, "initial_simplex": around}
    found = minimize(loss, start, method="Nelder-Mead", options=options)
    return np.asarray(found.x), float(found.fun)


def _with_wander(
    both: FloatArray,
    stretches: list[slice],
    waves: FloatArray,
    plain: FloatArray,
    plain_loss: float,
    others: list[FloatArray],
) -> Colour:
    """The colour with a wandering level beside it, if that is enough more likely than the one without."""

    def loss(point: FloatArray) -> float:
        return restricted_loss(both, stretches, _wandering(point), waves)

    firsts = [np.array([*point, size]) for point in (plain, *others) for size in _FIRST_WANDER]
    values = [loss(point) for point in firsts]
    if min(values) > plain_loss + 1.0:
        return _colour(plain)
    best = firsts[int(np.argmin(values))]
    point, least = _lowest(loss, best, np.array([0.12, 0.1, 0.5]), most=110)
    return _wandering(point) if least < plain_loss - _WORTH else _colour(plain)


def _colour(point: FloatArray) -> Colour:
    rho = float(np.clip(np.tanh(point[0]), -0.5, _RHO_MOST))
    share = float(np.clip(point[1], -0.3, 0.98))
    return Colour(rho, -share * rho)


def _wandering(point: FloatArray) -> Colour:
    """point[2]: logarithm of the waves' size over the fast noise's standard deviation."""
    fast = _colour(point)
    size = float(np.exp(np.clip(point[2], -4.0, 6.0)))
    return replace(fast, wander=size * size * fast.variance_ratio)


def restricted_loss(both: FloatArray, stretches: list[slice], colour: Colour, waves: FloatArray | None = None) -> float:
    """-2 log restricted likelihood, up to a constant, of the last column given the others; the size is profiled out."""
    whitener = Whitener(stretches, colour, np.zeros((len(both), 0)) if waves is None else waves)
    diagonal = _triangle(whitener.apply(both))
    q = both.shape[1] - 1
    usable = diagonal[:q][diagonal[:q] > 1e-12]
    freedom = len(both) - len(usable)
    size = max(diagonal[q] ** 2, 1e-300)
    return freedom * float(np.log(size)) + 2 * float(np.sum(np.log(usable))) + whitener.log_determinant


def _triangle(white: FloatArray) -> FloatArray:
    """Diagonal of the triangular factor: by Cholesky where that is safe, else by QR."""
    gram = white.T @ white
    scale = np.sqrt(np.maximum(np.diag(gram), 1e-300))
    firm, rank = lapack.dpotrf(gram / np.outer(scale, scale), lower=1)
    if rank == 0 and np.min(np.diag(firm)) > 1e-3:
        return np.asarray(np.diag(firm) * scale)
    return np.asarray(np.abs(np.diag(np.linalg.qr(white, mode="r"))))


def effective_samples(n: int, colour: Colour) -> float:
    """How many independent samples tell as much about a level as n of this noise do."""
    at_rest = ((1 + colour.c) / (1 - colour.rho)) ** 2
    return float(np.clip(n * colour.variance_ratio / at_rest, 3.0, n))
