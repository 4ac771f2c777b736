"""Whitening under ARMA(1, 1) noise, record by record and across lost samples."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.signal import lfilter

from .run import FloatArray


@dataclass(frozen=True)
class Colour:
    """e[k] - rho e[k-1] = w[k] + c w[k-1]: the noise's shape without its size.

    Attributes
    ----------
    rho, c : float
    wander : float
        Variance of each slow wave's size (see `slow_waves`) over that of w; 0 where no level wanders.
    """

    rho: float = 0.0
    c: float = 0.0
    wander: float = 0.0

    @property
    def variance_ratio(self) -> float:
        """Variance of e over that of w: (1 + 2 rho c + c^2)/(1 - rho^2)."""
        return (1 + 2 * self.rho * self.c + self.c**2) / (1 - self.rho**2)


WHITE = Colour()


def stretches_of(valid: NDArray[np.bool_]) -> list[slice]:
    """Runs of consecutive valid samples, numbered among the valid ones only."""
    if valid.all():
        return [slice(0, len(valid))] if len(valid) else []
    edges = np.flatnonzero(np.diff(np.concatenate([[0], valid.astype(int), [0]])))
    lengths = edges[1::2] - edges[::2]
    ends = np.cumsum(lengths)
    return [slice(int(end - length), int(end)) for end, length in zip(ends, lengths, strict=True)]


def whiten(columns: FloatArray, stretches: list[slice], colour: Colour) -> FloatArray:
    """Columns, (n,) or (n, q), turned into innovations; each stretch starts from the stationary spread.

    The first innovation of a stretch is its first value over the noise's standard deviation in units of w's, and the
    recursion goes on from the value of w expected given it.
    """
    if colour.rho == 0.0 and colour.c == 0.0:
        return columns
    out = np.empty_like(columns)
    ratio = colour.variance_ratio
    for part in stretches:
        block = columns[part]
        out[part][0] = block[0] / np.sqrt(ratio)
        if len(block) > 1:
            state = (-colour.rho - colour.c / ratio) * block[:1]
            out[part][1:] = lfilter([1.0, -colour.rho], [1.0, colour.c], block[1:], axis=0, zi=state)[0]
    return out


def log_determinant(stretches: list[slice], colour: Colour) -> float:
    """log det of the noise covariance in units of w's variance, up to the innovations after each first sample."""
    return len(stretches) * float(np.log(colour.variance_ratio))
