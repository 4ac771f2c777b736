"""Linear least squares on whitened columns: the best coefficients, what is left, and what other columns add."""

from dataclasses import dataclass

import numpy as np
from scipy.linalg import lapack, solve_triangular

from .run import FloatArray

# Columns as independent as this lose at most ten of sixteen digits in their normal equations; others go through QR.
_FIRM = 1e-3


@dataclass(frozen=True, eq=False)
class Solved:
    """The best linear part at given shape and dead time.

    Attributes
    ----------
    cost : float
        Sum of squares of the whitened residual.
    residual : (n,) array
        Whitened.
    coefficients : (q,) array
        Gain first, then a level for each run, then the common drift rate of an integrating plant (and of one with two
        integrators the runs' first speeds), then gain times zero time, then initial states.
    """

    cost: float
    residual: FloatArray
    coefficients: FloatArray


@dataclass(frozen=True, eq=False)
class Projected:
    """A solution with the factor of its columns.

    Attributes
    ----------
    solved : Solved
    matrix : (n, q) array
    scale : (q,) array
    firm : (q, q) array or None
        Cholesky factor of the scaled normal equations; None where they would lose too many digits.
    basis : (n, q) array or None
        Orthonormal instead; columns that add nothing are zero.
    """

    solved: Solved
    matrix: FloatArray
    scale: FloatArray
    firm: FloatArray | None
    basis: FloatArray | None

    def cleared(self, columns: FloatArray) -> FloatArray:
        """(n, f) columns without what the matrix could take up."""
        if self.firm is None:
            assert self.basis is not None
            return np.asarray(columns - self.basis @ (self.basis.T @ columns))
        along = (self.matrix.T @ columns) / self.scale[:, None]
        return np.asarray(columns - self.matrix @ (lapack.dpotrs(self.firm, along, lower=1)[0] / self.scale[:, None]))


def projected(matrix: FloatArray, target: FloatArray) -> Projected:
    """Least squares of target, (n,), on matrix, (n, q)."""
    gram = matrix.T @ matrix
    scale = np.sqrt(np.diag(gram))
    scale[scale == 0] = 1.0
    firm, rank = lapack.dpotrf(gram / np.outer(scale, scale), lower=1)
    if rank == 0 and np.min(np.diag(firm)) > _FIRM:
        coefficients = lapack.dpotrs(firm, (matrix.T @ target) / scale, lower=1)[0] / scale
        residual = target - matrix @ coefficients
        return Projected(Solved(float(residual @ residual), residual, coefficients), matrix, scale, firm, None)
    q, r = np.linalg.qr(matrix / scale)
    weak = np.abs(np.diag(r)) < 1e-11
    r[weak, weak.nonzero()[0]] = 1.0
    q[:, weak] = 0.0
    along = q.T @ target
    residual = target - q @ along
    coefficients = solve_triangular(r, along) / scale
    return Projected(Solved(float(residual @ residual), residual, coefficients), matrix, scale, None, q)


def root_of_covariance(white: FloatArray) -> tuple[FloatArray, float]:
    """A with A A' = (white' white)^-1, and the log of its volume; directions that say nothing spread far."""
    scale = np.sqrt(np.einsum("ij,ij->j", white, white))
    scale[scale == 0] = 1.0
    sizes, rotation = np.linalg.eigh((white / scale).T @ (white / scale))
    inverse = 1.0 / np.sqrt(np.maximum(sizes, 1e-14 * sizes[-1]))
    return (rotation * inverse) / scale[:, None], float(np.sum(np.log(inverse)) - np.sum(np.log(scale)))
