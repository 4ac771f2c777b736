"""Plants as exact sampled models side by side: mixed structures, fractional dead time, points between the samples."""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import expm

from ...ident.plant import ComplexArray, Plant
from ...ident.run import FloatArray
from .drives import Drives, drives_of

IndexArray = NDArray[np.int64]

_SNAP = 1e-9  # a dead time this close to a whole number of samples is taken as whole


@dataclass(frozen=True, eq=False)
class Bank:
    """p plants under a held command, one column each, at one update interval T.

    With the total delay (d + f) T, 0 <= f < 1, each sample brings::

        [y(1/m) ... y(m/m), x'] = step @ [x, u[k-d-1], u[k-d]]

    The last state is what the controller sees when a response filter stands before it.

    Attributes
    ----------
    interval : float, s
    points : int
        m, sub-points per sample; the last is the next sample itself.
    states : int
        n, padded to the largest plant.
    step : (m + n, n + 2, p) array
    rate : (m + 1, n + 2, p) array
        Slope of the response at the sub-points and just after the command's arrival, response unit per s.
    seen : (n + 1, p) array
        What the controller sees at a sample: of [x, u[k-d-1]].
    ahead : bool
        Whether that is the response somewhat later, and not as it is.
    lag : (p,) array of int
        d.
    delay : (p,) array, s
        Total delay.
    integrators : (p,) array of int
    static_gain : (p,) array
    unstable : (p,) array of int
        Plant poles with positive real part.
    transition, arrive_old, arrive_new : (n, n, p), (n, p), (n, p) arrays
        One whole sample: of x, u[k-d-1] and u[k-d].
    filtered : bool
        Whether the controller sees the last state instead of the response.
    poles : (p, n) complex array, 1/s
        Of the plants, NaN where one has fewer.
    filter_time : float, s
        Of the response filter; 0 without.
    drives : Drives or None
        The same plants as drives with friction, where friction holds any.
    valves : (3, p) array or None, command unit
        Of a valve that sticks before each plant, see `Plausible.valves`.
    curves : (2, p) array or None
        Of a gain that differs along the command, see `Plausible.curves`.
    """

    interval: float
    points: int
    states: int
    step: FloatArray
    rate: FloatArray
    seen: FloatArray
    lag: NDArray[np.int64]
    delay: FloatArray
    integrators: NDArray[np.int64]
    static_gain: FloatArray
    unstable: NDArray[np.int64]
    transition: FloatArray
    arrive_old: FloatArray
    arrive_new: FloatArray
    filtered: bool
    poles: ComplexArray
    filter_time: float = 0.0
    drives: Drives | None = None
    valves: FloatArray | None = None
    curves: FloatArray | None = None
    ahead: bool = False


def build_bank(
    plants: Sequence[Plant],
    interval: float,
    *,
    computation_delay: float = 0.0,
    filter_time: float = 0.0,
    points: int = 4,
    stiction: FloatArray | None = None,
    valves: FloatArray | None = None,
    curves: FloatArray | None = None,
    predict: bool = False,
) -> Bank:
    """Discretise the plants exactly.

    Parameters
    ----------
    plants : sequence of Plant, length p
    interval : float, s
    computation_delay : float, s
        Added to each dead time; a negative one is allowed as long as the sum is not (it is cut at zero).
    filter_time : float, s
        First-order filter between the response and the controller.
    points : int
        Sub-points per sample.
    stiction : (p,) array, command unit, optional
        Dry friction of each plant.
    valves : (p, 3) array, command unit, optional
        Of a valve that sticks before each plant.
    curves : (p, 2) array, optional
        Of a gain that differs along the command.
    predict : bool
        Where the total delay is negative, let the controller see the response that much ahead, under the old command.

    References
    ----------
    Åström and Wittenmark, Computer-Controlled Systems, section on systems with time delay (from memory).
    """
    models = [_companion(plant, interval) for plant in plants]
    order = max(1, *(len(model.input) for model in models))
    a, b, c, direct = _padded(models, order, interval)
    poles = _poles(models, order)
    if filter_time > 0.0:
        a, b, c = _with_filter(a, b, c, direct, filter_time)
    total = np.array([plant.dead_time + computation_delay for plant in plants])
    delay = np.maximum(total, 0.0)
    whole, part = _split(delay / interval)
    phi, old, new = _sub_steps(a, b, interval, part, points)
    output = np.concatenate([c, np.zeros_like(c[:, :1])], axis=1) if filter_time > 0.0 else c
    smooth = _assemble(
        plants, interval, points, a, b, output, direct, phi, old, new, whole, delay, part, filter_time > 0.0, poles
    )
    drives = None if stiction is None else drives_of(plants, stiction, delay)
    ahead = predict and bool(np.any(total < 0.0))
    seen = _ahead(a, b, smooth.seen, np.maximum(-total, 0.0)) if ahead else smooth.seen
    sticking, bends = None if valves is None else valves.T, None if curves is None else curves.T
    kept = replace(smooth, filter_time=filter_time, drives=drives, seen=seen, ahead=ahead)
    return replace(kept, valves=sticking, curves=bends)


def _ahead(a: FloatArray, b: FloatArray, seen: FloatArray, time: FloatArray) -> FloatArray:
    """What is seen, (n + 1, p), after another `time` (p,) s under the old command."""
    count, order = b.shape
    both = np.zeros((count, order + 1, order + 1))
    both[:, :order, :order], both[:, :order, order] = a, b
    moved = expm(both * time[:, None, None])
    found = np.einsum("ip,pij->jp", seen[:order], moved[:, :order])
    found[order] += seen[order]
    return np.asarray(found)


@dataclass(frozen=True, eq=False)
class _Model:
    """x' = system x + input u, y = output x + direct u, time in seconds, states scaled alike."""

    system: FloatArray
    input: FloatArray
    output: FloatArray
    direct: float


def _companion(plant: Plant, interval: float) -> _Model:
    """Controllable companion form in the time scale of the plant's own poles, so that the states are of like size."""
    bottom = np.asarray(plant.denominator, dtype=float)
    bottom = bottom[np.flatnonzero(bottom)[0] :]
    order = bottom.size - 1
    top = np.concatenate([np.zeros(order + 1), np.asarray(plant.numerator, dtype=float)])[-(order + 1) :]
    scale = _pace(bottom, interval)
    powers = scale ** np.arange(order + 1)
    below = bottom / (bottom[0] * powers)
    above = top / (bottom[0] * powers)
    system = np.eye(order, k=-1)
    if order:
        system[0] = -below[1:]
    start = np.zeros(order)
    start[:1] = 1.0
    return _Model(scale * system, scale * start, above[1:] - below[1:] * above[0], float(above[0]))


def _pace(bottom: FloatArray, interval: float) -> float:
    """Geometric mean of the pole sizes away from the origin, 1/s; 1/T where there is none."""
    order = int(np.flatnonzero(bottom)[-1])
    return float(abs(bottom[order] / bottom[0]) ** (1.0 / order)) if order else 1.0 / interval


def _padded(models: list[_Model], order: int, interval: float) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
    """Stack with the column first; spare states decay by themselves and touch nothing."""
    count = len(models)
    a = np.tile(np.eye(order) * (-1.0 / interval), (count, 1, 1))
    b, c = np.zeros((count, order)), np.zeros((count, order))
    for i, model in enumerate(models):
        n = model.input.size
        a[i, :n, :n], b[i, :n], c[i, :n] = model.system, model.input, model.output
    return a, b, c, np.array([model.direct for model in models])


def _poles(models: list[_Model], order: int) -> ComplexArray:
    """(p, order) eigenvalues, the models of one size together; NaN where a plant has fewer."""
    poles = np.full((len(models), order), np.nan + 0j)
    sizes = np.array([model.input.size for model in models])
    for size in np.unique(sizes[sizes > 0]):
        index = np.flatnonzero(sizes == size)
        systems = np.array([models[i].system for i in index])
        found = np.linalg.eigvals(systems).astype(np.complex128)
        standing = np.abs(found) <= 1e-9 * np.abs(systems).max(axis=(1, 2))[:, None]
        poles[index, :size] = np.where(standing, 0.0, found)
    return poles


def _with_filter(
    a: FloatArray, b: FloatArray, c: FloatArray, direct: FloatArray, time: float
) -> tuple[FloatArray, FloatArray, FloatArray]:
    count, order = b.shape
    wide = np.zeros((count, order + 1, order + 1))
    wide[:, :order, :order] = a
    wide[:, order, :order] = c / time
    wide[:, order, order] = -1.0 / time
    return wide, np.concatenate([b, direct[:, None] / time], axis=1), c


def _split(delay: FloatArray) -> tuple[NDArray[np.int64], FloatArray]:
    whole = np.floor(delay + _SNAP).astype(np.int64)
    part = delay - whole
    return whole, np.where(part < _SNAP, 0.0, part)


def _sub_steps(
    a: FloatArray, b: FloatArray, interval: float, part: FloatArray, points: int
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """State at each sub-point: (m, p, n, n) of x, (m, p, n) of the old and of the newly arrived command.

    Before the arrival f the old command has acted alone; after it Gamma(t) - Gamma(t - f) and Gamma(t - f).
    """
    count, order = b.shape
    both = np.zeros((count, order + 1, order + 1))
    both[:, :order, :order], both[:, :order, order] = a, b
    stride = interval / points
    one = expm(both * stride)
    first = np.floor(part * points).astype(np.int64) + 1
    lead = expm(both * (first * stride - part * interval)[:, None, None])
    phi, old, new = [], [], []
    whole, fresh = np.tile(np.eye(order + 1), (count, 1, 1)), np.zeros_like(both)
    for j in range(1, points + 1):
        whole = one @ whole
        fresh = np.where(np.equal(first, j)[:, None, None], lead, one @ fresh)
        arrived = (j >= first)[:, None] * fresh[:, :order, order]
        phi.append(whole[:, :order, :order])
        old.append(whole[:, :order, order] - arrived)
        new.append(arrived)
    return np.array(phi), np.array(old), np.array(new)


def _assemble(
    plants: Sequence[Plant],
    interval: float,
    points: int,
    a: FloatArray,
    b: FloatArray,
    output: FloatArray,
    direct: FloatArray,
    phi: FloatArray,
    old: FloatArray,
    new: FloatArray,
    whole: NDArray[np.int64],
    delay: FloatArray,
    part: FloatArray,
    filtered: bool,
    poles: ComplexArray,
) -> Bank:
    order = b.shape[1]
    seen = np.zeros((order + 1, len(plants)))
    if filtered:
        seen[order - 1] = 1.0
    else:
        seen[:order], seen[order] = output.T, direct
    arrived = np.array([(j / points > part + _SNAP) for j in range(1, points + 1)])
    return Bank(
        interval,
        points,
        order,
        _rows(phi, old, new, output, direct, arrived),
        _slopes(a, b, phi, old, new, output, arrived, interval, part),
        seen,
        whole,
        np.asarray(delay, dtype=float),
        np.array([plant.integrators for plant in plants]),
        np.array([plant.static_gain for plant in plants]),
        np.sum(poles.real > 1e-12 * np.abs(poles), axis=1),
        np.ascontiguousarray(phi[-1].transpose(1, 2, 0)),
        np.ascontiguousarray(old[-1].T),
        np.ascontiguousarray(new[-1].T),
        filtered,
        poles,
    )


def _rows(
    phi: FloatArray,
    old: FloatArray,
    new: FloatArray,
    output: FloatArray,
    direct: FloatArray,
    arrived: NDArray[np.bool_],
) -> FloatArray:
    points, count, order = old.shape
    step = np.zeros((points + order, order + 2, count))
    step[:points, :order] = np.einsum("pi,mpij->mjp", output, phi)
    step[:points, order] = np.einsum("pi,mpi->mp", output, old) + np.where(arrived, 0.0, direct)
    step[:points, order + 1] = np.einsum("pi,mpi->mp", output, new) + np.where(arrived, direct, 0.0)
    step[points:, :order] = phi[-1].transpose(1, 2, 0)
    step[points:, order], step[points:, order + 1] = old[-1].T, new[-1].T
    return step


def _slopes(
    a: FloatArray,
    b: FloatArray,
    phi: FloatArray,
    old: FloatArray,
    new: FloatArray,
    output: FloatArray,
    arrived: NDArray[np.bool_],
    interval: float,
    part: FloatArray,
) -> FloatArray:
    """Output times (A x + B u) at the sub-points, and just after the arrival of the new command."""
    points, count, order = old.shape
    slope = np.einsum("pi,pij->pj", output, a)
    kick = np.einsum("pi,pi->p", output, b)
    both = np.zeros((count, order + 1, order + 1))
    both[:, :order, :order], both[:, :order, order] = a, b
    meet = expm(both * (part * interval)[:, None, None])
    rate = np.zeros((points + 1, order + 2, count))
    rate[:points, :order] = np.einsum("pi,mpij->mjp", slope, phi)
    rate[:points, order] = np.einsum("pi,mpi->mp", slope, old) + np.where(arrived, 0.0, kick)
    rate[:points, order + 1] = np.einsum("pi,mpi->mp", slope, new) + np.where(arrived, kick, 0.0)
    rate[points, :order] = np.einsum("pi,pij->jp", slope, meet[:, :order, :order])
    rate[points, order] = np.einsum("pi,pi->p", slope, meet[:, :order, order])
    rate[points, order + 1] = kick
    return rate
