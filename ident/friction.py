"""A drive with dry friction: a command sets it moving against friction, and its position is the integral of its speed.

    T v' = u - c sign(v) - v,   x' = v;   at rest it stays as long as -c_backward <= u <= c_forward

Between changes of a held command each phase (moving one way, slowing to rest, stuck) is solved in closed form, so the
response is exact and costs a few phases a change, not a step a sample.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from .plant import Plant
from .run import FloatArray, Run
from .simulate import Grid, free_run, grid_of


@dataclass
class _Phases:
    start: list[float]
    speed: list[float]
    final: list[float]
    place: list[float]

    def add(self, start: float, speed: float, final: float, place: float) -> None:
        self.start.append(start)
        self.speed.append(speed)
        self.final.append(final)
        self.place.append(place)


def friction_response(
    grid: Grid, start: float, time_constant: float, friction: tuple[float, float], dead_time: float
) -> FloatArray:
    """Position, (n,), of the unit-gain drive, from rest at zero.

    Parameters
    ----------
    grid : Grid
        Of a held command.
    start : float, command unit
        Steady command before the record, from the operating command.
    time_constant : float, s
    friction : (forward, backward), command unit
        c: what the command must exceed, either way, before the drive moves.
    dead_time : float, s

    Examples
    --------
    >>> grid = Grid(np.arange(4.0), np.array([0.0, 3.0, 3.0, 3.0]), 1.0, False)
    >>> [round(float(x), 6) for x in friction_response(grid, 0.0, 1e-9, (1.0, 1.0), 0.0)]
    [0.0, 0.0, 2.0, 4.0]
    """
    times, levels = _changes(grid, start, dead_time + grid.late)
    start_of, speed, final, place = friction_phases(times, levels, float(grid.time[-1]), time_constant, friction)
    at = np.searchsorted(start_of, grid.time, side="right") - 1
    passed = grid.time - start_of[at]
    return np.asarray(place[at] + _moved(speed[at], final[at], passed, time_constant))


def friction_phases(
    times: Sequence[float] | FloatArray,
    levels: Sequence[float] | FloatArray,
    end: float,
    time_constant: float,
    friction: tuple[float, float],
) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
    """When each phase begins, (m,), s; speed there, the speed it tends to, and the place, all of unit gain.

    Parameters
    ----------
    times, levels : (k,) sequences, s and command unit
        When each level of the command arrives, the first at zero; from the operating command.
    end : float, s
    time_constant : float, s
    friction : (forward, backward), command unit
    """
    phases = _phases([float(t) for t in times], [float(v) for v in levels], end, time_constant, friction)
    return np.array(phases.start), np.array(phases.speed), np.array(phases.final), np.array(phases.place)


def _moved(speed: FloatArray, final: FloatArray, passed: FloatArray, time_constant: float) -> FloatArray:
    return final * passed - (speed - final) * time_constant * np.expm1(-passed / time_constant)


def _changes(grid: Grid, start: float, dead_time: float) -> tuple[list[float], list[float]]:
    """Instants at which a new level arrives, from time zero on, and the levels."""
    changed = np.flatnonzero(np.diff(grid.moved, prepend=0.0) != 0.0)
    return [0.0, *(grid.time[changed] + dead_time).tolist()], [start, *(start + grid.moved[changed]).tolist()]


def _phases(
    times: list[float], levels: list[float], end: float, time_constant: float, friction: tuple[float, float]
) -> _Phases:
    phases = _Phases([], [], [], [])
    forward, backward = friction
    speed = place = 0.0
    for begin, finish, level in zip(times, [*times[1:], max(end, times[-1]) + time_constant], levels, strict=True):
        now = begin
        for _ in range(3):
            length = finish - now
            stuck = speed == 0.0 and -backward <= level <= forward
            way = math.copysign(1.0, speed if speed else level)
            final = 0.0 if stuck else (level - forward if way > 0.0 else level + backward)
            phases.add(now, speed, final, place)
            if stuck:
                break
            stops = speed != 0.0 and final * way < 0.0
            until_rest = time_constant * math.log1p(-speed / final) if stops else math.inf
            step = min(length, until_rest)
            decay = math.exp(-step / time_constant)
            place += final * step + (speed - final) * time_constant * (1 - decay)
            speed = 0.0 if until_rest <= length else final + (speed - final) * decay
            now += step
            if until_rest > length:
                break
    return phases


def rough_free_run(
    plant: Plant, run: Run, operating_command: float, level: float, friction: tuple[float, float]
) -> FloatArray:
    """Response, (n,), as `free_run` gives it, with the drive's dry friction where there is any.

    Parameters
    ----------
    friction : (forward, backward), command unit
        Zeros for a plant of any structure; else the plant is K/(s (T s + 1)).
    """
    if max(friction) <= 0.0:
        return free_run(plant, run, operating_command, level)
    lag, unit, _ = plant.denominator
    bias = run.start_command - operating_command
    moved = friction_response(grid_of(run), bias, lag / unit, friction, plant.dead_time)
    return level + plant.static_gain * moved
