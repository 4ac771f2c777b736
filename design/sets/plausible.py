"""The loop gains at which the requirements hold on the asked share of the plausible plants, zeros fixed."""

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from ...ident.run import FloatArray
from ..designed import GainInterval
from ..discretise import GainColumns
from ..slack import requirement_slacks
from ..values import Bench, values_of

Holds = Callable[[FloatArray], NDArray[np.bool_]]  # (g,) factors of the loop gain -> (rows, g)

_INSIDE = 4  # points between two neighbours when an edge is closed in
_ROUNDS = 2
_NOWHERE = 1e-9  # a factor so small, or by its inverse so large, that it stands for no bound at all


def plausible_sets(
    bench: Bench, gains: GainColumns, chosen: float, around: tuple[GainInterval, ...], plants: int
) -> tuple[GainInterval, ...]:
    """Intervals of K in which at least the share `confidence` of the plants holds everything stated, all stable."""
    count = min(plants, len(bench.plausible.plants))
    confidence = bench.situation.requirements.confidence
    situation = bench.situation
    index = np.linspace(0, len(bench.plausible.plants) - 1, count).astype(int)

    def holds(factors: FloatArray) -> NDArray[np.bool_]:
        laws = gains.take(np.zeros(factors.size * count, dtype=int)).times(np.repeat(factors, count))
        values = values_of(bench, np.tile(index, factors.size), laws, refine=False)
        slacks = requirement_slacks(values, situation)
        good = values.stable & np.all(slacks >= 0.0, axis=0)
        share = good.reshape(factors.size, count).mean(axis=1)
        steady = values.stable.reshape(factors.size, count).all(axis=1)
        return np.asarray((steady & (share >= confidence - 1e-9))[None])

    grid = _within(around, chosen)
    return _scaled(intervals_of(holds, grid)[0], chosen)


def _within(around: tuple[GainInterval, ...], chosen: float) -> FloatArray:
    """A coarse grid over the fitted plant's intervals, a little beyond their ends, the chosen gain among them."""
    lows = [low / chosen for low, _ in around if low]
    highs = [high / chosen for _, high in around if high]
    low = min([0.9 * x for x in lows] + ([] if lows else [1e-3]) + [0.8])
    high = max([1.1 * x for x in highs] + ([] if highs else [30.0]) + [1.25])
    return np.unique(np.append(np.geomspace(low, high, 20), 1.0))


def intervals_of(
    holds: Holds, grid: FloatArray, *, rounds: int = _ROUNDS, inside: int = _INSIDE
) -> list[tuple[GainInterval, ...]]:
    """Intervals of each row of `holds`, edges closed in by sections; an end of the grid that holds is followed out."""
    table = holds(grid)
    row, place = np.nonzero(table[:, 1:] != table[:, :-1])
    left, right = grid[place], grid[place + 1]
    for _ in range(rounds if row.size else 0):
        steps = np.exp(np.linspace(0.0, 1.0, inside + 2)[1:-1, None] * np.log(right / left)) * left
        inner = holds(steps.ravel())[row].reshape(row.size, inside, row.size)
        own = inner[np.arange(row.size), :, np.arange(row.size)]
        same = np.cumprod(own == table[row, place][:, None], axis=1).sum(axis=1)
        points = np.column_stack([left, steps.T, right])
        left, right = points[np.arange(row.size), same], points[np.arange(row.size), same + 1]
    edges = np.where(table[row, place], left, right)
    far = holds(np.array([_NOWHERE, 1.0 / _NOWHERE])) if table[:, [0, -1]].any() else np.zeros((len(table), 2), bool)
    return [
        _paired(edges[row == i], bool(table[i, 0]), bool(table[i, -1]), grid, far[i]) for i in range(table.shape[0])
    ]


def _paired(
    edges: FloatArray, opens: bool, ends: bool, grid: FloatArray, far: NDArray[np.bool_]
) -> tuple[GainInterval, ...]:
    """Edges in order as intervals; below the grid down to 0, above it to no bound, where it holds far out too."""
    bounds: list[float | None] = [float(e) for e in edges]
    if opens:
        bounds.insert(0, 0.0 if far[0] else float(grid[0]))
    if ends:
        bounds.append(None if far[1] else float(grid[-1]))
    return tuple(zip(bounds[::2], bounds[1::2], strict=True))


def _scaled(intervals: tuple[GainInterval, ...], chosen: float) -> tuple[GainInterval, ...]:
    def times(edge: float | None) -> float | None:
        return None if edge is None else edge * chosen

    return tuple((times(low), times(high)) for low, high in intervals)
