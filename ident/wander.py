"""A level that wanders slowly beside the fast noise: a few slow waves a record, each of a random size.

Waves of half a period, one, one and a half ... periods over the record, their sizes falling with their number, are what
a random walk is made of. Their common size is one more property of the noise, found with the others; where it is
nothing, nothing changes.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from .run import FloatArray
from .whiten import Colour, log_determinant, whiten

WAVES = 6


def slow_waves(times: Sequence[FloatArray]) -> FloatArray:
    """(n, WAVES * runs) waves, cos(pi k t/T)/k for k = 1 ... WAVES over each run's length T, zero in other runs.

    Parameters
    ----------
    times : sequence of (n_i,) arrays, s
        Of the valid samples of each run; n is their total.
    """
    total = sum(len(time) for time in times)
    out = np.zeros((total, WAVES * len(times)))
    order = np.arange(1, WAVES + 1)
    at = 0
    for i, time in enumerate(times):
        share = (time - time[0]) / max(time[-1] - time[0], 1e-300) if len(time) else time
        out[at : at + len(time), WAVES * i : WAVES * (i + 1)] = np.cos(np.pi * order * share[:, None]) / order
        at += len(time)
    return out


@dataclass(frozen=True, eq=False)
class Whitener:
    """Turns columns into ones under which the noise is white, the wandering level included.

    Attributes
    ----------
    stretches : list of slice
    colour : Colour
        Its `wander` is the variance of each wave's size over that of w.
    waves : (n, k) array
    """

    stretches: list[slice]
    colour: Colour
    waves: FloatArray

    def apply(self, columns: FloatArray) -> FloatArray:
        """Columns, (n,) or (n, q), as (n + k,) or (n + k, q); without wandering as (n, ...).

        The inner products of the result are those under the inverse covariance of noise and waves together: the waves
        are projected out with their prior as so many further rows.
        """
        return self.cleared(whiten(columns, self.stretches, self.colour))

    def cleared(self, white: FloatArray) -> FloatArray:
        """The same from columns that the fast noise's whitening has passed."""
        if self.colour.wander <= 0.0:
            return white
        basis, _ = self._basis
        longer = np.concatenate([white, np.zeros((basis.shape[1], *white.shape[1:]))])
        return np.asarray(longer - basis @ (basis.T @ longer))

    @cached_property
    def log_determinant(self) -> float:
        """log det of the covariance in units of w's variance."""
        plain = log_determinant(self.stretches, self.colour)
        if self.colour.wander <= 0.0:
            return plain
        _, sizes = self._basis
        return float(plain + 2 * np.sum(np.log(sizes)) + len(sizes) * np.log(self.colour.wander))

    @cached_property
    def _white_waves(self) -> FloatArray:
        return whiten(self.waves, self.stretches, self.colour)

    @cached_property
    def _basis(self) -> tuple[FloatArray, FloatArray]:
        k = self._white_waves.shape[1]
        prior = np.eye(k) / np.sqrt(self.colour.wander)
        stacked = np.concatenate([self._white_waves, prior])
        basis, triangle = np.linalg.qr(stacked)
        return basis, np.abs(np.diag(triangle))
