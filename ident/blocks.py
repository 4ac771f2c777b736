"""Blocks of samples: a long record read by the means of command and response over blocks of one length.

The mean over a block is a linear, time-invariant filter. Command and response pass the same one, so that the plant
between them stays what it was; only what the command does inside a block is lost: it is taken as straight between the
stamps of the blocks. Two small errors of that are put right, or they would outweigh the noise of a long record. A
command that is held from sample to sample has, as a mean over n samples, steps of one sample in place of a straight
rise: half a sample of delay (`held`). And a line drawn through samples of a curve lies inside it: its spectrum is
smaller by sinc^2(f h) = 1 - (pi f h)^2/3 + ..., h the length of a block; the response is made smaller alike
(`as_drawn`), unless the command moves at the edges of blocks only, where the line is no approximation.
"""

from dataclasses import dataclass

import numpy as np

from .run import FloatArray

LEAST_FILLED = 0.5  # of a block's samples; one with fewer is a gap


@dataclass(frozen=True, eq=False)
class Means:
    """Blocks of a record.

    Attributes
    ----------
    time : (m,) array, s
        Mean of the stamps of each block.
    columns : (m, k) array
        Mean of each column over its finite samples; NaN where fewer than half are finite.
    """

    time: FloatArray
    columns: FloatArray


class BlockMeans:
    """Means over blocks of a record that comes in parts.

    Parameters
    ----------
    length : float, s
        Of a block.
    interval : float, s
        Between samples.
    columns : int

    Examples
    --------
    >>> blocks = BlockMeans(0.4, 0.1, 1)
    >>> first = blocks.add(np.array([0.0, 0.1, 0.2]), np.array([[1.0], [1.0], [1.0]]))
    >>> second = blocks.add(np.array([0.3, 0.4, 0.5]), np.array([[3.0], [5.0], [5.0]]))
    >>> first.columns.size, second.columns, blocks.end().columns
    (0, array([[1.5]]), array([[5.]]))
    """

    def __init__(self, length: float, interval: float, columns: int) -> None:
        self._length, self._fewest = length, LEAST_FILLED * length / interval
        self._slack = 0.01 * interval / length
        self._rest = np.empty((0, 1 + columns))
        self._moved = self._moved_at_edges = 0.0

    def add(self, time: FloatArray, columns: FloatArray) -> Means:
        """The blocks that these samples complete.

        Parameters
        ----------
        time : (n,) array, s
            Increasing, later than all before.
        columns : (n, k) array
            NaN where a sample is lost.
        """
        rows = np.concatenate([self._rest, np.column_stack([time, columns])])
        if len(rows) == 0:
            return self._means(rows)
        number = self._number(rows[:, 0])
        new = slice(max(0, len(self._rest) - 1), None)  # from the last sample before on
        moves = np.abs(np.diff(rows[new, 1]))
        self._moved += float(moves.sum())
        self._moved_at_edges += float(moves[np.diff(number[new]) > 0.0].sum())
        begin = int(np.searchsorted(number, number[-1]))
        self._rest = rows[begin:]
        return self._means(rows[:begin])

    @property
    def share_at_edges(self) -> float:
        """Of the movement of the first column, the share at the edges of blocks; 1 where it doesn't move."""
        return self._moved_at_edges / self._moved if self._moved else 1.0

    def end(self) -> Means:
        """The last block, where it is filled enough."""
        rest, self._rest = self._rest, self._rest[:0]
        return self._means(rest)

    def _number(self, time: FloatArray) -> FloatArray:
        return np.asarray(np.floor(time / self._length + self._slack))

    def _means(self, rows: FloatArray) -> Means:
        if len(rows) == 0:
            return Means(rows[:, 0], rows[:, 1:])
        starts = np.flatnonzero(np.concatenate([[True], np.diff(self._number(rows[:, 0])) > 0.0]))
        counts = np.diff(np.append(starts, len(rows)))
        finite = np.isfinite(rows)
        filled = np.add.reduceat(finite.astype(np.float64), starts, axis=0)
        first = np.where(finite[starts], rows[starts], 0.0)  # what stands still is then exactly its mean
        apart = np.where(finite, rows - np.repeat(first, counts, axis=0), 0.0)
        with np.errstate(invalid="ignore", divide="ignore"):
            means = first + np.add.reduceat(apart, starts, axis=0) / filled
        means = np.where(filled < LEAST_FILLED * counts[:, None], np.nan, means)
        enough = counts >= self._fewest
        return Means(means[enough, 0], means[enough, 1:])


def held(command: FloatArray, samples: float) -> FloatArray:
    """(m,) block means of a command that is held from sample to sample, later by half a sample.

    Between the stamps of the blocks the command is then straight, as the mean of a held command is but for its steps.

    Parameters
    ----------
    command : (m,) array
        Means over blocks.
    samples : float
        In a block.
    """
    before = np.concatenate([command[:1], command[:-1]])
    return np.asarray(command - (command - before) / (2.0 * samples))


def as_drawn(time: FloatArray, response: FloatArray, length: float) -> FloatArray:
    """(m,) block means of a response, smaller by what a line through the command's means misses.

    A twelfth of the second difference; beside a gap or a lost block there is none.

    Parameters
    ----------
    time : (m,) array, s
    response : (m,) array
        Means over blocks, NaN where lost.
    length : float, s
        Of a block.
    """
    out = response.copy()
    even = np.abs(time[2:] - time[:-2] - 2.0 * length) < 0.5 * length
    bend = np.where(even, np.diff(response, 2), 0.0)
    out[1:-1] += np.where(np.isfinite(bend), bend, 0.0) / 12.0
    return out
