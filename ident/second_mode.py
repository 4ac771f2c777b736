"""A second mode beside a fitted resonance: looked for in what the resonance leaves, frequency by frequency."""

from dataclasses import dataclass

import numpy as np

from .modes import modes_of
from .regression import Regression
from .run import FloatArray
from .simulate import response
from .whiten import Colour

# Frequencies and damping ratios at which a mode is looked for.
_FREQUENCIES = 48
_DAMPINGS = (0.03, 0.1)

# From so far below the resonance to so far above it, as far as the sampling shows.
_BELOW, _ABOVE = 0.25, 20.0

# Two found modes nearer than this factor are one.
_APART = 1.3


@dataclass(frozen=True)
class Mode:
    """A mode that the residual asks for.

    Attributes
    ----------
    frequency : float, rad/s
    damping : float
    share : float
        Its gain over that of the resonance; negative where it moves against it.
    gained : float
        Rise of twice the log likelihood, to first order.
    """

    frequency: float
    damping: float
    share: float
    gained: float


def second_modes(problem: Regression, theta: FloatArray, coefficients: FloatArray, colour: Colour) -> list[Mode]:
    """The two modes that the residual of a fitted resonance asks for most, the better first.

    Parameters
    ----------
    problem : Regression
        Of a resonance.
    theta : (3,) array
    coefficients : (q,) array
    colour : Colour

    Notes
    -----
    Each mode's response to the command is cleared of what the resonance's own parameters could take up. Twice the log
    likelihood of the best one rises by chance too: it is the largest of many correlated chi-squares.
    """
    here = problem.at(theta)
    columns = here.columns_under(colour)
    own = np.column_stack([here.slopes_under(coefficients, colour), columns])
    own = own / np.maximum(np.sqrt(np.einsum("ij,ij->j", own, own)), 1e-300)
    basis, triangle = np.linalg.qr(own)
    basis = basis[:, np.abs(np.diag(triangle)) > 1e-9]
    residual = problem.target_under(colour) - columns @ coefficients
    residual = residual - basis @ (basis.T @ residual)
    total = float(residual @ residual)
    (frequency, _), dead_time = problem.split(theta)
    highest = min(_ABOVE * frequency, 0.8 * np.pi / problem.interval)
    if total <= 0.0 or highest <= frequency:
        return []
    found = []
    for at in np.geomspace(_BELOW * frequency, highest, _FREQUENCIES).tolist():
        if 1.0 / _APART < at / frequency < _APART:
            continue
        for damping in _DAMPINGS:
            modes = modes_of((1.0,), (1.0 / (at * at), 2.0 * damping / at, 1.0))
            parts = [
                response(modes, grid, dead_time)[run.valid]
                for grid, run in zip(problem.grids, problem.runs, strict=True)
            ]
            column = problem.whitener(colour).apply(np.concatenate(parts)[:, None])[:, 0]
            column = column - basis @ (basis.T @ column)
            size = float(column @ column)
            if size <= 0.0:
                continue
            along = float(column @ residual) / size
            left = max(total - along * along * size, 1e-12 * total)
            gained = len(problem.measured) * float(np.log(total / left))
            found.append(Mode(at, damping, along / float(coefficients[0]), gained))
    found.sort(key=lambda mode: -mode.gained)
    others = [mode for mode in found[1:] if abs(np.log(mode.frequency / found[0].frequency)) > np.log(_APART)]
    return [*found[:1], *others[:1]]
