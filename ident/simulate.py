"""Response of a plant to a logged command: exact between samples, with a dead time of any fraction of a sample."""

from dataclasses import dataclass

import numpy as np
from scipy.signal import lfilter

from .modes import Modes, modes_of
from .plant import ComplexArray, Plant
from .run import FloatArray, Run

# Stamps within this share of an interval of an even grid are taken as even: the response moves by less than that share
# of what it does in one sample.
_EVEN = 2e-3


@dataclass(frozen=True, eq=False)
class Grid:
    """Sample times and the command's change since before the record, ready for simulation.

    Attributes
    ----------
    time : (n,) array, s, from 0
    moved : (n,) array, command unit
        command - steady command before the record.
    interval : float or None, s
        Of an even grid; None where the stamps are uneven.
    interpolated : bool
        The command runs straight between samples; else it is held.
    late : float, s
        The command moves so long after its samples.
    """

    time: FloatArray
    moved: FloatArray
    interval: float | None
    interpolated: bool
    late: float = 0.0


def grid_of(run: Run) -> Grid:
    """Grid of a run; "auto" between samples is taken as held."""
    time = run.time - run.time[0]
    n = len(time)
    interval = float(time[-1] / (n - 1))
    even = bool(np.max(np.abs(time - interval * np.arange(n))) <= _EVEN * interval)
    moved = run.command - run.start_command
    return Grid(time, moved, interval if even else None, run.between == "interpolated", run.command_late)


def response(modes: Modes, grid: Grid, dead_time: float) -> FloatArray:
    """Zero-state response, (n,), of the modes to `grid.moved` delayed by `dead_time` seconds.

    Each mode obeys x' = pole x + residue u(t - dead_time); the response is the real part of the sum of x. Even grids go
    through one recursion a mode; uneven ones through a scan over all instants at which anything changes.
    """
    dead_time = dead_time + grid.late
    if grid.interval is not None:
        total = np.zeros(len(grid.time))
        for pole, residue in zip(modes.poles, modes.residues, strict=True):
            state = mode_state(complex(pole), grid, dead_time)
            total += residue.real * state.real
            if residue.imag:
                total -= residue.imag * state.imag
    else:
        total = _uneven(modes, grid, dead_time)
    if modes.direct:
        total = total + modes.direct * delayed_command(grid, dead_time)
    if modes.double:
        total = total + modes.double * _twice_integrated(grid, dead_time)
    return total


def mode_state(pole: complex, grid: Grid, dead_time: float) -> np.ndarray:
    """State, (n,), of x' = pole x + u(t - dead_time) on an even grid; real for a real pole."""
    assert grid.interval is not None
    drive = delayed_drive(mode_weights(pole, grid, dead_time), grid, dead_time)
    growth = np.exp(pole * grid.interval)
    if pole.imag == 0.0:
        return np.asarray(lfilter([0.0, 1.0], [1.0, -growth.real], drive.real))
    return np.asarray(lfilter([0.0, 1.0], [1.0, -growth], drive))


def mode_weights(pole: complex, grid: Grid, dead_time: float) -> tuple[complex, complex, complex]:
    """Weights of u[k-d+1], u[k-d], u[k-d-1] in x[k+1] on an even grid, d the whole samples of the dead time."""
    assert grid.interval is not None
    _, part = _whole_and_part(grid.interval, dead_time)
    return _weights(pole, grid.interval, part, grid.interpolated)


def delayed_drive(weights: tuple[complex, ...], grid: Grid, dead_time: float) -> np.ndarray:
    """The commands that `mode_weights` weighs, summed: (n,), real where the weights are."""
    assert grid.interval is not None
    whole, _ = _whole_and_part(grid.interval, dead_time)
    ahead, now, before = (w.real if w.imag == 0.0 else w for w in map(complex, weights))
    drive = now * _shift(grid.moved, whole)
    if before:
        drive = drive + before * _shift(grid.moved, whole + 1)
    return drive + ahead * _shift(grid.moved, whole - 1) if ahead else drive


def delayed_parts(grid: Grid, dead_time: float) -> tuple[FloatArray, FloatArray, float]:
    """u[k-d], u[k-d-1] and the share of a sample that the dead time is past d whole ones."""
    assert grid.interval is not None
    whole, part = _whole_and_part(grid.interval, dead_time)
    return _shift(grid.moved, whole), _shift(grid.moved, whole + 1), part / grid.interval


def _whole_and_part(step: float, dead_time: float) -> tuple[int, float]:
    whole = int(np.floor(dead_time / step * (1 + 1e-12)))
    return whole, min(max(dead_time - whole * step, 0.0), step)


def _weights(pole: complex, step: float, part: float, interpolated: bool) -> tuple[complex, complex, complex]:
    """Weights of u[k-d+1], u[k-d], u[k-d-1] in x[k+1] for a delay of d samples and `part` seconds."""
    rest = step - part
    if not interpolated:
        return 0.0, _held(pole, rest), np.exp(pole * rest) * _held(pole, part)
    share = part / step
    level_a, slope_a = _held(pole, part), _ramp(pole, part)
    level_b, slope_b = _held(pole, rest), _ramp(pole, rest)
    carry = np.exp(pole * rest)
    # first stretch runs from (1-share) u0 + share u_before to u0, the second from u0 to (1-share) u_ahead + share u0
    before = carry * share * (level_a - slope_a)
    now = carry * ((1 - share) * level_a + share * slope_a) + level_b - (1 - share) * slope_b
    return (1 - share) * slope_b, now, before


def _held(pole: complex, h: float) -> complex:
    """Integral of exp(pole (h - s)) over s in 0..h."""
    return complex(np.expm1(pole * h) / pole) if pole else complex(h)


def _ramp(pole: complex, h: float) -> complex:
    """Integral of exp(pole (h - s)) s/h over s in 0..h."""
    z = pole * h
    if abs(z) < 1e-2:
        return h * (0.5 + z / 6 + z * z / 24 + z**3 / 120 + z**4 / 720 + z**5 / 5040)
    return complex(h * (np.expm1(z) - z) / (z * z))


def _shift(u: FloatArray, by: int) -> FloatArray:
    """u[k - by], zero before the record, the last value kept behind it."""
    if by == 0:
        return u
    out = np.zeros_like(u)
    if by > 0:
        out[by:] = u[: max(len(u) - by, 0)]
    else:
        out[:by] = u[-by:]
        out[by:] = u[-1]
    return out


def _uneven(modes: Modes, grid: Grid, dead_time: float) -> FloatArray:
    arrive = grid.time + dead_time
    inside = arrive < grid.time[-1]
    instants = np.unique(np.concatenate([grid.time, arrive[inside]]))
    h = np.diff(instants)
    start, end = _input_between(grid, instants[:-1] - dead_time, instants[1:] - dead_time)
    at = np.searchsorted(instants, grid.time)
    total = np.zeros(len(grid.time))
    for pole, residue in zip(modes.poles, modes.residues, strict=True):
        level, slope = _held_many(complex(pole), h), _ramp_many(complex(pole), h)
        state = _scan(np.exp(pole * h), start * level + (end - start) * slope)
        total += (residue * np.concatenate([[0.0], state])[at]).real
    return total


def _input_between(grid: Grid, left: FloatArray, right: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Command moved at the two ends of each stretch, straight in between."""
    if grid.interpolated:
        a = np.interp(left, grid.time, grid.moved, left=0.0)
        b = np.interp(right, grid.time, grid.moved, left=0.0)
        return a, b
    index = np.searchsorted(grid.time, 0.5 * (left + right), side="right") - 1
    held = np.where(index >= 0, grid.moved[np.maximum(index, 0)], 0.0)
    return held, held


def _held_many(pole: complex, h: FloatArray) -> ComplexArray:
    return np.asarray(np.expm1(pole * h) / pole if pole else h.astype(complex))


def _ramp_many(pole: complex, h: FloatArray) -> ComplexArray:
    z = pole * h
    series = 0.5 + z / 6 + z * z / 24 + z**3 / 120 + z**4 / 720 + z**5 / 5040
    safe = np.where(np.abs(z) < 1e-2, 1.0, z)
    return np.asarray(h * np.where(np.abs(z) < 1e-2, series, (np.expm1(z) - z) / (safe * safe)))


def _scan(factor: ComplexArray, drive: ComplexArray) -> ComplexArray:
    """x[j+1] = factor[j] x[j] + drive[j] from x[0] = 0, by doubling; returns x[1:]."""
    a, b = factor.astype(complex), drive.astype(complex)
    reach = 1
    while reach < len(a):
        new_b = b.copy()
        new_a = a.copy()
        new_b[reach:] = a[reach:] * b[:-reach] + b[reach:]
        new_a[reach:] = a[reach:] * a[:-reach]
        a, b = new_a, new_b
        reach *= 2
    return b


def delayed_command(grid: Grid, dead_time: float) -> FloatArray:
    """The command moved, seen `dead_time` later, at each sample; a jump counts from the instant it arrives."""
    left = grid.time - dead_time
    if grid.interpolated:
        return np.interp(left, grid.time, grid.moved, left=0.0)
    slack = 1e-9 * (grid.time[-1] / max(len(grid.time) - 1, 1))
    index = np.searchsorted(grid.time, left + slack, side="right") - 1
    return np.where(index >= 0, grid.moved[np.maximum(index, 0)], 0.0)


def at_rest(integrators: int, time: FloatArray) -> FloatArray:
    """(n,) what a steady unit of command makes of a unit-gain plant by itself: 1, t or t^2/2."""
    return np.asarray(time**integrators / max(integrators, 1))


def _twice_integrated(grid: Grid, dead_time: float) -> FloatArray:
    """(n,) second integral of the command moved, `dead_time` later: parabolas between samples, or cubics."""
    h = np.diff(grid.time)
    start = grid.moved[:-1]
    rise = np.diff(grid.moved) / h if grid.interpolated else np.zeros(len(h))
    once = np.concatenate([[0.0], np.cumsum(h * (start + h * rise / 2))])
    twice = np.concatenate([[0.0], np.cumsum(h * (once[:-1] + h * (start / 2 + h * rise / 6)))])
    at = grid.time - dead_time
    index = np.clip(np.searchsorted(grid.time, at, side="right") - 1, 0, len(h) - 1)
    since = np.maximum(at - grid.time[index], 0.0)
    moved = twice[index] + since * (once[index] + since * (start[index] / 2 + since * rise[index] / 6))
    return np.where(at > 0, moved, 0.0)


def free_run(plant: Plant, run: Run, operating_command: float, level: float) -> FloatArray:
    """Response, (n,), that the plant gives to a run's command, started at rest.

    Parameters
    ----------
    plant : Plant
    run : Run
    operating_command : float, command unit
        The command that holds the response at `level`.
    level : float, response unit
        Response held by the operating command; for an integrating plant, the response at the run's start.

    Notes
    -----
    A plant that settles starts where the steady command before the run holds it; an integrating one starts at `level`
    and moves from there with the difference between that command and the operating one.

    Examples
    --------
    >>> run = Run("a", np.arange(4.0), np.array([0.0, 1, 1, 1]), np.zeros(4), command_before=0.0)
    >>> free_run(Plant((2.0,), (1.0, 0.0)), run, 0.0, 5.0).tolist()
    [5.0, 5.0, 7.0, 9.0]
    """
    grid = grid_of(run)
    moved = response(modes_of(plant.numerator, plant.denominator), grid, plant.dead_time)
    bias = run.start_command - operating_command
    return level + moved + plant.static_gain * bias * at_rest(plant.integrators, grid.time)
