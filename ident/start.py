"""First guesses from the data: a library of unit-gain responses, held against the record at many dead times at once."""

import itertools
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray
from scipy.ndimage import minimum_filter

from .catalogue import Shape
from .regression import Regression
from .run import FloatArray

_ROWS = 800


def first_guesses(problem: Regression, count: int = 4) -> list[FloatArray]:
    """`count` different thetas (log shapes, dead time) of the library, the best first.

    For each shape the response without dead time is shifted by whole samples; gain, levels and drift are then in closed
    form, so one projection scores every dead time. What is lower than all around it in shapes and dead time goes first:
    each such place may be a valley of its own, and the next best ones may all lie in that of the best.
    """
    thinned = _thinned(problem)
    rows, basis, target = thinned
    shifts = _shifts(problem)
    later = _later(rows, shifts)
    axes = [_axis(shape, problem) for shape in problem.structure.shapes]
    library = list(itertools.product(*axes))
    costs = np.array([_costs(problem, values, later, basis, target) for values in library])
    if problem.jumps:
        scored = [_jump(problem, values, thinned, shifts, row) for values, row in zip(library, costs, strict=True)]
        scored.sort(key=lambda pair: pair[0])
        return different([theta for _, theta in scored], problem, count)
    lattice = costs.reshape(*[len(axis) for axis in axes], len(shifts))
    valleys = lattice <= minimum_filter(lattice, size=3, mode="nearest")
    bottoms = np.argwhere(valleys.reshape(costs.shape))
    lowest = np.column_stack([np.arange(len(library)), np.argmin(costs, axis=1)])
    places = [*_in_order(bottoms, costs), *_in_order(lowest, costs)]
    guesses = [np.array([*np.log(library[i]), shifts[at] * problem.interval]) for i, at in places]
    return different(guesses, problem, count)


def _in_order(places: NDArray[np.int64], costs: FloatArray) -> NDArray[np.int64]:
    """Places, (m, 2), the least cost first."""
    return np.asarray(places[np.argsort(costs[places[:, 0], places[:, 1]])])


def _jump(
    problem: Regression,
    values: tuple[float, ...],
    thinned: tuple[list[NDArray[np.int64]], FloatArray, FloatArray],
    shifts: NDArray[np.int64],
    costs: FloatArray,
) -> tuple[float, FloatArray]:
    """Cost and theta of a shape that jumps: at one sample or at the next, which the grid of dead times may miss."""
    rows, basis, target = thinned
    at = int(np.argmin(costs))
    near = np.arange(shifts[max(at - 1, 0)], shifts[min(at + 1, len(shifts) - 1)] + 1)
    closer = _costs(problem, values, _later(rows, near), basis, target)
    at = int(np.argmin(closer))
    dead_time = max(near[at] - 0.5, 0.0) * problem.interval
    return float(closer[at]), np.array([*np.log(values), dead_time])


def different(thetas: list[FloatArray], problem: Regression, count: int) -> list[FloatArray]:
    """The first `count` of these that are no near neighbours of one before."""
    kept: list[FloatArray] = []
    for theta in thetas:
        far = all(
            np.any(np.abs(theta[:-1] - other[:-1]) > 0.6)
            or abs(theta[-1] - other[-1]) > max(4 * problem.interval, 0.3 * other[-1])
            for other in kept
        )
        if far:
            kept.append(theta)
        if len(kept) == count:
            break
    return kept


def _thinned(problem: Regression) -> tuple[list[NDArray[np.int64]], FloatArray, FloatArray]:
    """Rows of each run that the library looks at, a basis of the fixed columns there, and the target less it."""
    total = sum(len(grid.time) for grid in problem.grids)
    stride = max(1, total // _ROWS)
    rows = []
    picked = []
    for run, part in zip(problem.runs, problem.parts, strict=True):
        valid = np.flatnonzero(run.valid)
        take = np.arange(0, len(valid), stride)
        rows.append(np.asarray(valid[take], dtype=np.int64))
        picked.append(part.start + take)
    index = np.concatenate(picked)
    basis, _ = np.linalg.qr(problem.fixed_columns[index])
    target = problem.measured[index]
    return rows, basis, np.asarray(target - basis @ (basis.T @ target))


def _shifts(problem: Regression) -> NDArray[np.int64]:
    longest = max(len(grid.time) for grid in problem.grids)
    share = np.linspace(0, 1, 30) ** 2
    return np.unique(np.round(share * 0.4 * longest).astype(int))


def _axis(shape: Shape, problem: Regression) -> FloatArray:
    if shape.kind == "time":
        return np.geomspace(0.3 * problem.interval, 3 * problem.duration, shape.steps)
    if shape.kind == "frequency":
        spread = np.geomspace(1.0 / problem.duration, 1.5 / problem.interval, shape.steps)
        return np.sort(np.concatenate([spread, _peaks(problem)]))
    if shape.kind == "command":
        return problem.span * np.geomspace(0.01, 0.5, shape.steps)
    return np.geomspace(shape.low, shape.high, shape.steps)


def _peaks(problem: Regression) -> FloatArray:
    """Up to three frequencies, rad/s, at which the differenced response of the longest run rings most."""
    run = max(problem.runs, key=lambda r: len(r.time))
    y = run.response[run.valid]
    if len(y) < 64:
        return np.zeros(0)
    change = np.diff(y)
    power = np.abs(np.fft.rfft((change - change.mean()) * np.hanning(len(change)))) ** 2
    smooth = np.convolve(power, np.ones(5) / 5, mode="same")
    found: list[int] = []
    for at in np.argsort(smooth)[::-1][:400]:
        if at > 2 and all(abs(np.log(at / other)) > 0.25 for other in found):
            found.append(int(at))
        if len(found) == 3:
            break
    return 2 * np.pi * np.array(found, dtype=float) / (len(change) * problem.interval)


def _later(rows: Sequence[np.ndarray], shifts: np.ndarray) -> list[NDArray[np.int64]]:
    """(rows, shifts) samples that stand at each row once shifted, a run each; the first one before the record."""
    return [np.maximum(np.asarray(index)[:, None] - shifts[None, :], 0) for index in rows]


def _costs(
    problem: Regression,
    values: tuple[float, ...],
    later: list[NDArray[np.int64]],
    basis: FloatArray,
    target: FloatArray,
) -> FloatArray:
    """Sum of squares left at each shift; the target is clear of the basis already."""
    runs = range(len(later))
    lead = _shifted(later, [problem.whole_response(i, values, 0.0) for i in runs])
    of_lead = basis.T @ lead
    power, along = _inner(lead, lead) - _inner(of_lead, of_lead), target @ lead
    total: FloatArray = np.full(len(along), float(target @ target))
    if problem.structure.zero:
        slope = _shifted(later, [problem.zero_response(i, values, 0.0) for i in runs])
        of_slope = basis.T @ slope
        # the zero's part is taken off by one step of orthogonalisation
        size = _inner(slope, slope) - _inner(of_slope, of_slope)
        size = np.where(size > 1e-12 * max(float(size.max()), 1e-300), size, np.inf)
        share = (_inner(lead, slope) - _inner(of_lead, of_slope)) / size
        rest = target @ slope
        total = total - rest**2 / size
        along, power = along - share * rest, power - share**2 * np.where(np.isinf(size), 0.0, size)
    safe = power > 1e-12 * max(float(power.max()), 1e-300)
    return np.asarray(np.where(safe, total - along**2 / np.where(safe, power, 1.0), total))


def _inner(a: FloatArray, b: FloatArray) -> FloatArray:
    """Inner products of the columns of one with those of the other."""
    return np.asarray(np.einsum("ij,ij->j", a, b))


def _shifted(later: list[NDArray[np.int64]], whole: list[FloatArray]) -> FloatArray:
    """(rows, shifts) responses of all runs, each column later by whole samples; at rest before."""
    return np.concatenate([moved.take(index) for index, moved in zip(later, whole, strict=True)])
