"""Command and response taken for each other: the past of the response foretells the command, and not the reverse."""

import numpy as np

from ..run import FloatArray
from .seen import Seen

MOST_SAMPLES = 4000  # longer records are averaged in blocks
FEWEST = 100
FORETOLD = 0.07  # log of the variance ratio, a sample
NOT_FORETOLD = 0.02
FLOOR = 1e-4  # of the standard deviation: what is smaller is rounding


def see_swapped(time: FloatArray, command: FloatArray, response: FloatArray) -> tuple[Seen, ...]:
    """The logged response foretells the logged command, which itself foretells nothing.

    Parameters
    ----------
    time : (n,) array, s
    command : (n,) array
    response : (n,) array
        NaN is left out.
    """
    good = np.isfinite(response) & np.isfinite(command)
    if np.count_nonzero(good) < FEWEST:
        return ()
    ahead, behind = foretelling(command[good], response[good]), foretelling(response[good], command[good])
    if behind < FORETOLD or ahead > NOT_FORETOLD:
        return ()
    return (
        Seen(
            "command and response swapped",
            f"{time[0]:.6g} s to {time[-1]:.6g} s",
            f"the response foretells the command by {behind:.2g} nats a sample, the reverse by {ahead:.2g}",
            "check which source is the command and which the response; a log taken in closed loop looks like this too",
            "holds",
        ),
    )


def foretelling(cause: FloatArray, effect: FloatArray) -> float:
    """How much better `effect` is foretold from both pasts than from its own, in nats a sample.

    Two linear predictions are compared, each from averages over ever longer stretches of the past; the added terms are
    charged half the log of the number of samples each. Below zero: not better.

    Parameters
    ----------
    cause, effect : (n,) arrays
        Finite.

    References
    ----------
    C. W. J. Granger, "Investigating causal relations by econometric models and cross-spectral methods", Econometrica 37
    (1969), definition 1 (from memory). G. Schwarz, "Estimating the dimension of a model", Ann. Statist. 6 (1978), for
    the charge (from memory).
    """
    other, effect = _scaled(cause), _scaled(effect)
    if not other.any() or not effect.any():
        return 0.0
    count = len(effect)
    own = np.column_stack([np.ones(count), _pasts(effect)])
    basis = _basis(own)
    rest = effect - basis @ (basis.T @ effect)
    more = _pasts(other)
    added = _basis(more - basis @ (basis.T @ more))
    left = rest - added @ (added.T @ rest)
    floor = count * FLOOR**2
    better = np.log((rest @ rest + floor) / (left @ left + floor))
    return float(better - added.shape[1] * np.log(count) / count)


def _scaled(values: FloatArray) -> FloatArray:
    """Block averages with mean 0 and standard deviation 1; zeros for a constant."""
    block = -(-len(values) // MOST_SAMPLES)
    whole = values[: len(values) // block * block].reshape(-1, block).mean(axis=1)
    spread = float(np.std(whole))
    if spread <= 1e-12 * max(1.0, float(np.abs(whole).max())):
        return np.zeros_like(whole)
    return np.asarray((whole - whole.mean()) / spread)


def _pasts(values: FloatArray) -> FloatArray:
    """(n, k) averages over the past: one sample back, two back, then stretches that grow by half of their distance."""
    count = len(values)
    sums = np.concatenate([[0.0], np.cumsum(values)])
    index = np.arange(count)
    columns, lag, width = [], 1, 1
    while lag + width - 1 <= count // 4:
        ends, begins = index - lag + 1, index - lag - width + 1
        mean = (sums[np.maximum(ends, 0)] - sums[np.maximum(begins, 0)]) / width
        columns.append(np.where(begins >= 0, mean, values[0]))
        lag, width = lag + width, max(1, (lag + width) // 2)
    return np.column_stack(columns)


def _basis(columns: FloatArray) -> FloatArray:
    """Orthonormal columns of the same space, those that are rounding left out."""
    left, sizes, _ = np.linalg.svd(columns, full_matrices=False)
    return np.asarray(left[:, sizes > FLOOR * np.sqrt(len(columns))])
