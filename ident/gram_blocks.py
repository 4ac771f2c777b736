"""A long record of steps in few rows: samples round each event, and blocks in between as four weighted samples each.

Between events the response is smooth. A block of it is projected once onto the discrete Legendre (Gram) polynomials up
to the third degree; what is left over is noise to every model, and only its size is kept. Gauss's quadrature for sums
over a block turns the projection into values at four places in it, so that a model is read off there and nowhere else,
and the sum of squares is that of all samples.

References
----------
Gautschi, W., Orthogonal Polynomials (2004), section 1.5.2: discrete Chebyshev polynomials; Golub and Welsch, Math.
Comp. 23 (1969) 221-230: quadrature from the recurrence (both from memory).
"""

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property, lru_cache

import numpy as np
from numpy.typing import NDArray

from .run import FloatArray

# Shortest block; a block grows with the time since the last event at most by this share of it.
_SHORTEST = 8
_SHARE = 0.3
_DEGREES = 4
# A block spans at most this many rad of a ringing that is still alive, and at most this share of the record.
_TURN = 0.8
_PART = 1.0 / 64.0
# Blocks up to this length are gathered together.
_TOGETHER = 512


@dataclass(frozen=True, eq=False)
class GramBlocks:
    """Which samples of one run stand by themselves and which in blocks.

    Attributes
    ----------
    single : (r,) array of int
    starts : mapping of block length to (m,) array of int
    """

    single: NDArray[np.int64]
    starts: dict[int, NDArray[np.int64]]

    @cached_property
    def at(self) -> FloatArray:
        """(rows,) places in samples: the single ones, then four a block, the shortest blocks first."""
        parts = [self.single.astype(float)]
        parts += [(first[:, None] + quadrature(length)[0]).ravel() for length, first in sorted(self.starts.items())]
        return np.concatenate(parts)

    @cached_property
    def weight(self) -> FloatArray:
        """(rows,)"""
        parts = [np.ones(len(self.single))]
        parts += [np.tile(np.sqrt(quadrature(n)[1]), len(first)) for n, first in sorted(self.starts.items())]
        return np.concatenate(parts)

    def gathered(self, values: FloatArray, index: NDArray[np.int64]) -> FloatArray:
        """(rows,) what stands for the samples: `values[index[k]]` is sample k."""
        parts = [values[index[self.single]]]
        for length, first in sorted(self.starts.items()):
            begin, onto = index[first], quadrature(length)[2]
            if length <= _TOGETHER:
                rows = np.lib.stride_tricks.sliding_window_view(values, length)[begin]
                parts.append((rows @ onto).ravel())
            else:
                parts += [values[k : k + length] @ onto for k in begin.tolist()]
        return np.concatenate(parts)


@lru_cache(maxsize=64)
def quadrature(length: int) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Four places in 0 ... length - 1, (4,), their weights, (4,), and the (length, 4) map of samples onto values there.

    sum_k q(k) over the block is sum_i weight_i q(place_i) for every q up to the seventh degree. The map gives the best
    cubic's values at the places, each times the root of its weight.
    """
    order = np.arange(1, _DEGREES)
    inner = order / 2.0 * np.sqrt((length**2 - order**2) / (4.0 * order**2 - 1.0))
    places, vectors = np.linalg.eigh(np.diag(inner, 1) + np.diag(inner, -1))
    weights = length * vectors[0] ** 2
    samples = np.arange(float(length)) - 0.5 * (length - 1)
    onto_places = _gram(np.asarray(places, dtype=float), length, inner) * np.sqrt(weights)[:, None]
    onto = _gram(samples, length, inner) @ onto_places.T
    return places + 0.5 * (length - 1), weights, onto


def _gram(x: FloatArray, length: int, inner: FloatArray) -> FloatArray:
    """(m, 4) orthonormal Gram polynomials at x, counted from the middle of the block."""
    out = np.zeros((len(x), _DEGREES))
    out[:, 0] = 1.0 / np.sqrt(length)
    for i in range(1, _DEGREES):
        earlier = inner[i - 2] * out[:, i - 2] if i > 1 else 0.0
        out[:, i] = (x * out[:, i - 1] - earlier) / inner[i - 1]
    return out


def lay_out(
    stretches: Sequence[slice],
    arrivals: Sequence[tuple[int, int]],
    settle: int,
    ringing: Sequence[tuple[float, float]],
) -> GramBlocks:
    """Single samples and blocks of one run.

    Parameters
    ----------
    stretches : sequence of slice
        Consecutive samples between lost ones.
    arrivals : sequence of (first, last)
        Samples between which each event may lie, in order.
    settle : int
        Samples that stand by themselves behind each event.
    ringing : sequence of (turn, fade)
        Rad and loss of the logarithm a sample of each mode that rings.
    """
    caps = _Caps(max(max(part.stop for part in stretches) * _PART, _SHORTEST), tuple(ringing))
    single: list[NDArray[np.int64]] = []
    starts: dict[int, list[int]] = {}
    for part in stretches:
        windows = [(part.start, part.start), *((max(a, part.start), b) for a, b in arrivals if b >= part.start)]
        edges = [a for a, _ in windows[1:]] + [part.stop]
        at = last = part.start
        for (_, late), edge in zip(windows, edges, strict=True):
            last = max(last, late)
            until = max(min(last + settle, part.stop), at)
            single.append(np.arange(at, until))
            at = _fill(until, min(edge, part.stop), last, caps, single, starts)
    kept = np.concatenate(single).astype(np.int64)
    return GramBlocks(kept, {b: np.array(first, dtype=np.int64) for b, first in starts.items()})


@dataclass(frozen=True)
class _Caps:
    most: float
    ringing: tuple[tuple[float, float], ...]

    def longest(self, since: int) -> float:
        """Longest block so many samples behind an event."""
        alive = [_TURN / turn for turn, fade in self.ringing if turn > 0 and fade * since < 16.0]
        return min(_SHARE * since, self.most, *alive) if alive else min(_SHARE * since, self.most)


def _fill(
    at: int, end: int, last: int, caps: _Caps, single: list[NDArray[np.int64]], starts: dict[int, list[int]]
) -> int:
    """Blocks from `at` on, as long as they may be; returns where the next one would begin."""
    while at < end:
        room = min(caps.longest(at - last), float(end - at))
        if room < _SHORTEST:
            step = min(_SHORTEST, end - at)
            single.append(np.arange(at, at + step))
        else:
            step = 1 << (int(room).bit_length() - 1)
            starts.setdefault(step, []).append(at)
        at += step
    return at
