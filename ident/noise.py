"""The noise's colour, estimated by restricted maximum likelihood beside the model's own columns."""

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Any, Protocol

import numpy as np
from scipy.linalg import lapack
from scipy.optimize import minimize

from .run import FloatArray
from .wander import Whitener
from .whiten import WHITE, Colour, log_determinant, whiten

_RHO_MOST = 0.9995
_FIRST_RHO = (0.0, 0.4, 0.7, 0.85, 0.93, 0.97, 0.99)
# Logarithms of the slow waves' size over the fast noise's standard deviation.
_SIZES = np.linspace(-3.0, 4.0, 22)
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
    return colour_seen(sampled(columns, residual, stretches, waves))


class Seen(Protocol):
    """What an estimate of the noise looks at."""

    @property
    def stretches(self) -> list[slice]:
        """Consecutive samples."""

    @property
    def count(self) -> int:
        """How many samples there are."""

    def white(self, colour: Colour) -> FloatArray:
        """(n', q + 1) whitened columns, well scaled, the residual last."""

    def white_waves(self, colour: Colour) -> FloatArray | None:
        """(n', k) whitened slow waves; None where no level wanders."""


@dataclass(frozen=True, eq=False)
class _Sampled:
    both: FloatArray
    stretches: list[slice]
    waves: FloatArray | None

    @property
    def count(self) -> int:
        return len(self.both)

    def white(self, colour: Colour) -> FloatArray:
        return whiten(self.both, self.stretches, colour)

    def white_waves(self, colour: Colour) -> FloatArray | None:
        return None if self.waves is None else whiten(self.waves, self.stretches, colour)


def sampled(columns: FloatArray, residual: FloatArray, stretches: list[slice], waves: FloatArray | None = None) -> Seen:
    """Every sample, as `estimate_colour` has it."""
    scaled = columns / np.maximum(np.sqrt(np.einsum("ij,ij->j", columns, columns)), 1e-300)
    return _Sampled(np.column_stack([scaled, residual]), stretches, waves)


def colour_seen(seen: Seen, start: Colour | None = None) -> Colour:
    """`estimate_colour` of what is seen; from a colour near the answer where one is known."""

    def loss(point: FloatArray) -> float:
        return _plain_loss(seen, _colour(point))

    firsts = [np.array([np.arctanh(rho), share]) for rho in _FIRST_RHO for share in (_FIRST_SHARE if rho else (0.0,))]
    if start is not None:
        firsts = [np.array([np.arctanh(start.rho), -start.c / start.rho if start.rho else 0.0])]
    values = [loss(point) for point in firsts]
    best = firsts[int(np.argmin(values))]
    point, least = _lowest(loss, best, np.array([0.12, 0.1]), most=90)
    if seen.white_waves(WHITE) is None:
        return _colour(point)
    return _with_wander(seen, point, least, [firsts[i] for i in np.argsort(values)[:4]])


def _plain_loss(seen: Seen, colour: Colour) -> float:
    white = seen.white(colour)
    diagonal = _diagonal(white.T @ white)
    if diagonal is None:
        diagonal = np.abs(np.diag(np.linalg.qr(white, mode="r")))
    return _loss(diagonal, seen.count, log_determinant(seen.stretches, colour))


def _lowest(
    loss: Callable[[FloatArray], float], start: FloatArray, widths: FloatArray, most: int
) -> tuple[FloatArray, float]:
    """Nelder and Mead's simplex from a start: the lowest point and its loss."""
    around = start + np.vstack([np.zeros(len(start)), np.diag(widths)])
    options: Any = {"xatol": 3e-3, "fatol": 2e-2, "maxfev": most, "initial_simplex": around}
    found = minimize(loss, start, method="Nelder-Mead", options=options)
    return np.asarray(found.x), float(found.fun)


def _with_wander(seen: Seen, plain: FloatArray, plain_loss: float, others: list[FloatArray]) -> Colour:
    """The colour with a wandering level beside it, if that is enough more likely than the one without."""

    def loss(point: FloatArray) -> float:
        return best_wander(seen, _colour(point))[0]

    firsts = [plain, *others]
    values = [loss(point) for point in firsts]
    if min(values) > plain_loss + 1.0:
        return _colour(plain)
    point, least = _lowest(loss, firsts[int(np.argmin(values))], np.array([0.12, 0.1]), most=60)
    if least >= plain_loss - _WORTH:
        return _colour(plain)
    fast = _colour(point)
    return replace(fast, wander=best_wander(seen, fast)[1])


def best_wander(seen: Seen, fast: Colour) -> tuple[float, float]:
    """Least restricted loss over the size of a wandering level beside this fast noise, and that size.

    One whitening serves all sizes: what the waves take from the inner products of the columns depends on their size
    only through the eigenvalues of the waves' own inner products.

    Returns
    -------
    loss, wander
        As `restricted_loss` has it at `replace(fast, wander=wander)`.
    """
    both, waves = seen.white(fast), seen.white_waves(fast)
    assert waves is not None
    m = both.shape[1]
    white = np.column_stack([both, waves])
    gram = white.T @ white
    own, vectors = np.linalg.eigh(gram[m:, m:])
    shared = gram[:m, m:] @ vectors
    wander = np.exp(2 * _SIZES) * fast.variance_ratio
    stiff = own + 1.0 / wander[:, None]
    left = gram[:m, :m] - (shared / stiff[:, None, :]) @ shared.T
    plain = log_determinant(seen.stretches, fast)
    determinants = np.sum(np.log(stiff), axis=1) + len(own) * np.log(wander) + plain
    losses = _losses(left, seen.count, determinants)
    at = int(np.argmin(losses))
    return float(losses[at]), float(wander[at])


def _losses(grams: FloatArray, n: int, determinants: FloatArray) -> FloatArray:
    """(k,) losses from (k, m, m) inner products; infinite where the factor is not safe."""
    scale = np.sqrt(np.maximum(np.diagonal(grams, axis1=1, axis2=2), 1e-300))
    try:
        firm = np.linalg.cholesky(grams / (scale[:, :, None] * scale[:, None, :]))
    except np.linalg.LinAlgError:
        diagonals = [_diagonal(gram) for gram in grams]
        return np.array(
            [
                np.inf if diagonal is None else _loss(diagonal, n, float(determinant))
                for diagonal, determinant in zip(diagonals, determinants, strict=True)
            ]
        )
    unit = np.diagonal(firm, axis1=1, axis2=2)
    diagonal = unit * scale
    usable = diagonal[:, :-1] > 1e-12
    size = np.maximum(diagonal[:, -1] ** 2, 1e-300)
    logs = np.sum(np.log(np.where(usable, diagonal[:, :-1], 1.0)), axis=1)
    found = (n - usable.sum(axis=1)) * np.log(size) + 2 * logs + determinants
    return np.asarray(np.where(unit.min(axis=1) > 1e-3, found, np.inf))


def _colour(point: FloatArray) -> Colour:
    rho = float(np.clip(np.tanh(point[0]), -0.5, _RHO_MOST))
    share = float(np.clip(point[1], -0.3, 0.98))
    return Colour(rho, -share * rho)


def restricted_loss(both: FloatArray, stretches: list[slice], colour: Colour, waves: FloatArray | None = None) -> float:
    """-2 log restricted likelihood, up to a constant, of the last column given the others; the size is profiled out."""
    whitener = Whitener(stretches, colour, np.zeros((len(both), 0)) if waves is None else waves)
    white = whitener.apply(both)
    diagonal = _diagonal(white.T @ white)
    if diagonal is None:
        diagonal = np.abs(np.diag(np.linalg.qr(white, mode="r")))
    return _loss(diagonal, len(both), whitener.log_determinant)


def _loss(diagonal: FloatArray, n: int, determinant: float) -> float:
    """The loss from the diagonal of the triangular factor of the whitened columns, the residual last."""
    usable = diagonal[:-1][diagonal[:-1] > 1e-12]
    size = max(float(diagonal[-1]) ** 2, 1e-300)
    return (n - len(usable)) * float(np.log(size)) + 2 * float(np.sum(np.log(usable))) + determinant


def _diagonal(gram: FloatArray) -> FloatArray | None:
    """Diagonal of the triangular factor by Cholesky; None where that is not safe."""
    scale = np.sqrt(np.maximum(np.diag(gram), 1e-300))
    firm, rank = lapack.dpotrf(gram / np.outer(scale, scale), lower=1)
    if rank != 0 or np.min(np.diag(firm)) <= 1e-3:
        return None
    return np.asarray(np.diag(firm) * scale)


def effective_samples(n: int, colour: Colour) -> float:
    """How many independent samples tell as much about a level as n of this noise do."""
    at_rest = ((1 + colour.c) / (1 - colour.rho)) ** 2
    return float(np.clip(n * colour.variance_ratio / at_rest, 3.0, n))
