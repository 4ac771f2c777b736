"""Whether a fitted model leaves something of what the command does in its residual, whatever the noise's colour."""

import numpy as np

from .regression import Regression
from .run import FloatArray
from .whiten import Colour

# How many lags of different time serve as directions, each behind the model and behind the bare command.
_LAGS = 6


def unexplained(problem: Regression, theta: FloatArray, coefficients: FloatArray, colour: Colour) -> float:
    """The most that one further term could raise twice the log likelihood, to first order.

    Parameters
    ----------
    problem : Regression
    theta : (s + 1,) array
    coefficients : (q,) array
    colour : Colour

    Returns
    -------
    float
        Infinite where the structure has no such directions in closed form.

    Notes
    -----
    The directions are the model's response behind one more lag, which is what a missing pole or zero adds to first
    order, and the bare command, by itself or behind a lag, without dead time, which is what a first turn in the wrong
    way looks like when it was taken for dead time. Each is cleared of what the model's own parameters could take up.
    Noise of any colour is not in step with the command: of pure noise the value is the largest of some correlated
    chi-squares with one degree of freedom.

    References
    ----------
    The score test: Rao, C. R., Proc. Camb. Phil. Soc. 44 (1948) 50-57 (from memory).
    """
    here = problem.at(theta)
    columns = here.columns_under(colour)
    own = np.column_stack([here.slopes_under(coefficients, colour), columns])
    extra = problem.further_directions(theta, colour, np.geomspace(problem.interval, 0.5 * problem.duration, _LAGS))
    if extra is None:
        return np.inf
    white = np.column_stack([own, extra, problem.target_under(colour) - columns @ coefficients])
    scale = np.sqrt(np.einsum("ij,ij->j", white, white))
    scale[scale == 0] = 1.0
    k = own.shape[1]
    basis, triangle = np.linalg.qr(white[:, :k] / scale[:k])
    basis = basis[:, np.abs(np.diag(triangle)) > 1e-9]
    rest = white[:, k:] / scale[k:]
    rest -= basis @ (basis.T @ rest)
    directions, residual = rest[:, :-1], rest[:, -1]
    sizes = np.einsum("ij,ij->j", directions, directions)
    along = residual @ directions
    gains = np.where(sizes > 1e-9, along**2 / np.maximum(sizes, 1e-9), 0.0)
    total, best = float(residual @ residual), float(np.max(gains, initial=0.0))
    return len(problem.measured) * float(np.log(total / max(total - best, 1e-12 * total))) if total > 0 else 0.0
