"""How large a sticking valve is: the likelihood of its numbers with the plant moving to first order beside them."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from .projected import Projected, projected
from .run import FloatArray
from .wander import Whitener

HeldBack = Callable[[float, float], FloatArray]


@dataclass(frozen=True, eq=False)
class ValveSize:
    """-2 log likelihood of a valve's numbers under one noise, up to a constant.

    Attributes
    ----------
    whitener : Whitener
    held_back : callable
        (band, short) to the (n,) response that such a valve takes off.
    residual : (n,) array
        Of the plant that the valve stands before, under the commands as logged.
    own : Projected
        Whitened columns that may move beside the valve.
    offsets : (n', runs) array
        Whitened, cleared of those: a valve that did not stand where the command did before each run.
    noise : float
        Standard deviation of the whitened residual.
    toll : float
        What the further columns cost.
    """

    whitener: Whitener
    held_back: HeldBack
    residual: FloatArray
    own: Projected
    offsets: FloatArray
    noise: float
    toll: float

    def loss(self, band: float, short: float) -> float:
        """The valve may have stood anywhere within its band before each run."""
        away = self.own.cleared(self.whitener.apply(self.residual - self.held_back(band, short))[:, None])[:, 0]
        gram = self.offsets.T @ self.offsets + np.eye(self.offsets.shape[1]) * 3.0 * (self.noise / band) ** 2
        along = self.offsets.T @ away
        cost = float(away @ away) - float(along @ np.linalg.solve(gram, along))
        return len(self.residual) * float(np.log(max(cost, 1e-300))) + self.toll


def valve_sizes(
    whitener: Whitener,
    held_back: HeldBack,
    residual: FloatArray,
    own: FloatArray,
    bends: FloatArray,
    offsets: FloatArray,
) -> list[ValveSize]:
    """One for each number of bends taken beside the plant's own columns, from none to all.

    Parameters
    ----------
    own, bends, offsets : (n, q), (n, b), (n, runs) arrays
        The plant's slopes; how a gain that bends with the command would show; what a valve would leave that did not
        stand where the command did.

    Notes
    -----
    Each bend costs the logarithm of the number of samples (Bayesian information criterion): what a record of two levels
    can't tell from a valve would otherwise leave the valve's size open although nothing speaks for a bend.
    """
    white = whitener.apply(np.column_stack([own, bends, offsets, residual]))
    first, last = own.shape[1], own.shape[1] + bends.shape[1]
    noise = float(np.sqrt(np.mean(white[:, -1] ** 2)))
    found = []
    for end in range(first, last + 1):
        solved = projected(white[:, :end], white[:, -1])
        clear = solved.cleared(white[:, last:-1])
        toll = (end - first) * float(np.log(len(residual)))
        found.append(ValveSize(whitener, held_back, residual, solved, clear, noise, toll))
    return found
