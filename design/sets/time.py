"""Gains that meet what has no formula: a measure without jumps is scanned and its roots are closed in."""

import math
from collections.abc import Callable, Sequence

import numpy as np
from numpy.typing import NDArray

from ...ident.run import FloatArray
from .spans import Span, joined

Measure = Callable[[FloatArray], FloatArray]  # (g,) factors to (rows, g): at most 0 where the row holds

_POINTS = 80  # in each stable span
_DECADES = 1e4  # how far below its upper end, or the chosen gain, a span is scanned
_CLOSE = 1.0  # a turning point whose measure is this near to 0 is looked at closely
_BESIDE = 0.35  # a measure this near to 0 may pass it twice before the next point
_TURNS, _WIDE = 2, 1.04  # how often points are added there, and between neighbours how far apart
_ZOOMS = 3
_INSIDE = 5  # points between two neighbours in a closer look
_CUTS = 8
_ROUNDS = 12
_MARGIN = 1e-9  # relative distance that is kept from the ends of a stable span


def scanned_sets(
    measure: Measure,
    stable: tuple[Span, ...],
    rows: int,
    *,
    tight: float = 1e-9,
    reach: float = math.inf,
    swinging: Sequence[int] = (),
) -> list[tuple[Span, ...]]:
    """Sets of each row of a measure within the stable spans.

    Parameters
    ----------
    measure : callable
        Continuous in the factor within each span.
    stable : tuple of Span
        Factors; 1 is the chosen gain.
    rows : int
    tight : float
        Relative width at which an edge is known.
    reach : float
        Factor up to which the measure is to be believed; what holds there holds to the end of its span.
    swinging : indices of rows
        Those that can pass their bound and come back within a few per cent of gain.
    """
    found: list[list[Span]] = [[] for _ in range(rows)]
    for span in stable:
        grid = _grid(span, reach)
        table = measure(grid)
        for _ in range(_TURNS):
            fresh = _beside_bounds(grid, table[list(swinging)])
            if fresh.size:
                grid, table = _merged(grid, table, fresh, measure(fresh))
        for _ in range(_ZOOMS):
            fresh = _near_misses(grid, table)
            if not fresh.size:
                break
            grid, table = _merged(grid, table, fresh, measure(fresh))
        for row, spans in enumerate(_closed_in(measure, grid, table, span, tight)):
            found[row] += spans
    return [joined(spans) for spans in found]


def _grid(span: Span, reach: float) -> FloatArray:
    low, high = span
    high = min(high, max(reach, 2.0 * low))
    top = high * (1.0 - _MARGIN) if np.isfinite(high) else max(1.0, low) * _DECADES
    bottom = low * (1.0 + _MARGIN) if low > 0.0 else min(top, 1.0) / _DECADES
    grid = np.geomspace(bottom, top, _POINTS)
    return np.unique(np.append(grid, 1.0)) if bottom < 1.0 < top else grid


def _beside_bounds(grid: FloatArray, table: FloatArray) -> FloatArray:
    """A point beside each at which a row is near its bound: it may pass it and come back in one step.

    Beside a bound the neighbour may be far from it, as at the end of a stable span.
    """
    with np.errstate(invalid="ignore"):
        near = np.abs(table) < _BESIDE
    places = np.flatnonzero((near[:, 1:] | near[:, :-1]).any(axis=0) & (grid[1:] > _WIDE * grid[:-1]))
    return np.asarray(0.5 * (grid[places] + grid[places + 1]))


def _near_misses(grid: FloatArray, table: FloatArray) -> FloatArray:
    """Points round every turning point of a row that comes near to its bound without crossing it."""
    inner, before, after = table[:, 1:-1], table[:, :-2], table[:, 2:]
    with np.errstate(invalid="ignore"):
        dips = (inner > 0.0) & (inner <= before) & (inner <= after) & (inner < _CLOSE)
        tops = (inner <= 0.0) & (inner >= before) & (inner >= after) & (inner > -_CLOSE)
        flat = (before == inner) & (after == inner)
    places = np.unique(np.nonzero((dips | tops) & ~flat)[1]) + 1
    places = places[grid[places + 1] - grid[places - 1] > 1e-7 * grid[places]]
    steps = np.linspace(0.0, 1.0, _INSIDE + 2)[1:-1]
    parts = [grid[a] + steps * (grid[b] - grid[a]) for i in places for a, b in ((i - 1, i), (i, i + 1))]
    return np.unique(np.concatenate(parts)) if parts else np.empty(0)


def _merged(
    grid: FloatArray, table: FloatArray, fresh: FloatArray, values: FloatArray
) -> tuple[FloatArray, FloatArray]:
    every = np.concatenate([grid, fresh])
    order = np.argsort(every, kind="stable")
    return every[order], np.concatenate([table, values], axis=1)[:, order]


def _closed_in(measure: Measure, grid: FloatArray, table: FloatArray, span: Span, tight: float) -> list[list[Span]]:
    holds = table <= 0.0
    row, place = np.nonzero(holds[:, 1:] != holds[:, :-1])
    ends = table[row, place], table[row, place + 1]
    edges = _roots(measure, row, (grid[place], grid[place + 1]), ends, tight)
    sets = []
    for i in range(len(table)):
        bounds = [float(edge) for edge in edges[row == i]]
        bounds = [span[0], *bounds] if holds[i, 0] else bounds
        bounds = [*bounds, span[1]] if holds[i, -1] else bounds
        sets.append(list(zip(bounds[::2], bounds[1::2], strict=True)))
    return sets


def _roots(
    measure: Measure,
    row: NDArray[np.int64],
    bracket: tuple[FloatArray, FloatArray],
    ends: tuple[FloatArray, FloatArray],
    tight: float,
) -> FloatArray:
    """Edges of all rows at once; each bracket is cut into eight at a time.

    A measure costs hardly more for many gains than for one, so many points a turn beat a cleverer choice of one, and a
    measure that jumps is no trouble.
    """
    a, b = (end.copy() for end in bracket)
    inside = ends[0] <= 0.0
    shares = np.arange(1, _CUTS) / _CUTS
    for _ in range(_ROUNDS):
        wide = np.flatnonzero(b - a > tight * b)
        if not wide.size:
            break
        points = a[wide, None] + (b - a)[wide, None] * shares
        table = measure(points.ravel())
        values = table[np.repeat(row[wide], _CUTS - 1), np.arange(points.size)].reshape(points.shape)
        other = np.column_stack([(values <= 0.0) != inside[wide, None], np.ones(wide.size, dtype=bool)])
        first = other.argmax(axis=1)
        stops = np.column_stack([a[wide], points, b[wide]])
        a[wide], b[wide] = stops[np.arange(wide.size), first], stops[np.arange(wide.size), first + 1]
    return 0.5 * (a + b)
