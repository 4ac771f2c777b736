"""The stretches of a record in which the command stands still, and what the response does in them."""

from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from ..run import FloatArray

MOST_MOVES = 40  # beyond them a record is one long excitation
SHORTEST = 10  # samples


@dataclass(frozen=True, eq=False)
class Rest:
    """One stretch.

    Attributes
    ----------
    first, last : int
        Half-open indices.
    command : float
    response : (k,) array
        With its lost samples.
    """

    first: int
    last: int
    command: float
    response: FloatArray

    @property
    def end(self) -> FloatArray:
        """The good samples of the last quarter, five at least where there are as many."""
        tail = self.response[-max(5, len(self.response) // 4) :]
        return np.asarray(tail[np.isfinite(tail)])

    @property
    def still_moves(self) -> float:
        """How far the median of its last quarter is from that of the quarter before."""
        quarter = max(1, len(self.response) // 4)
        last, before = self.response[-quarter:], self.response[-2 * quarter : -quarter]
        if not np.isfinite(last).any() or not np.isfinite(before).any():
            return np.inf
        return float(abs(np.nanmedian(last) - np.nanmedian(before)))

    def is_flat(self, within: float) -> bool:
        """Whether both halves of its end agree, so that the response has settled."""
        end = self.end
        half = len(end) // 2
        return half >= 2 and bool(abs(end[half:].mean() - end[:half].mean()) <= within)


def rests(command: FloatArray, response: FloatArray) -> tuple[Rest, ...]:
    """Stretches of ten good samples at least; none for a command that moves more often than forty times.

    Parameters
    ----------
    command, response : (n,) arrays
    """
    moves = np.flatnonzero(np.diff(command) != 0.0) + 1
    if len(moves) > MOST_MOVES:
        return ()
    edges = [0, *moves.tolist(), len(command)]
    return tuple(
        Rest(first, last, float(command[first]), response[first:last])
        for first, last in pairwise(edges)
        if np.count_nonzero(np.isfinite(response[first:last])) >= SHORTEST
    )
