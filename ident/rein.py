"""Draws that a normal law puts where the record itself says no are drawn back towards the fit."""

import numpy as np
from scipy.stats import f as fisher

from .regression import Regression
from .run import FloatArray
from .whiten import Colour

# Nearer than this (in the logarithm of a shape) the normal law is trusted as it is.
_NEAR = 0.35
_HALVINGS = 10


def rein_in(problem: Regression, theta: FloatArray, draws: FloatArray, colour: Colour, freedom: float) -> FloatArray:
    """Draws, (m, s + 1 + q), with far shapes checked against the record and their linear part solved anew.

    A far draw is kept if the cost there has risen by no more than the 99.9 % point of Fisher's F for all shapes and the
    dead time, and the gain has not changed its sign; else the step from the fit is halved until both hold.
    """
    k = len(theta)
    far = np.flatnonzero(np.any(np.abs(draws[:, : k - 1] - theta[:-1]) > _NEAR, axis=1))
    if len(far) == 0:
        return draws
    best = problem.solve(theta, colour)
    most = best.cost * (1 + k / freedom * float(fisher.ppf(0.999, k, freedom)))
    out = draws.copy()
    for i in far:
        step = draws[i, :k] - theta
        for _ in range(_HALVINGS):
            solved = problem.solve(theta + step, colour)
            if solved.cost <= most and solved.coefficients[0] * best.coefficients[0] > 0:
                break
            step = 0.5 * step
        out[i, :k] = theta + step
        out[i, k:] = solved.coefficients
    return out
