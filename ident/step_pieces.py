"""Responses to a held command with few changes as pieces in closed form, one piece a change."""

from dataclasses import dataclass

import numpy as np

from .friction import friction_phases
from .modes import Modes
from .pieces import Pieces
from .run import FloatArray
from .simulate import Grid


@dataclass(frozen=True, eq=False)
class Steps:
    """A held command with few changes.

    Attributes
    ----------
    time : (m,) array, s
        At which the command moves.
    level : (m,) array, command unit
        What it moves to, less the steady command before the run.
    """

    time: FloatArray
    level: FloatArray

    def arriving(self, dead_time: float) -> tuple[FloatArray, FloatArray]:
        """Starts, (m + 1,), and levels of the pieces in which the command is constant, `dead_time` later."""
        return np.concatenate([[0.0], self.time + dead_time]), np.concatenate([[0.0], self.level])


def steps_of(grid: Grid) -> Steps:
    """The changes of a grid's command."""
    changed = np.flatnonzero(np.diff(grid.moved, prepend=0.0) != 0.0)
    return Steps(grid.time[changed] + grid.late, grid.moved[changed])


def unit_pieces(modes: Modes, steps: Steps, dead_time: float) -> Pieces:
    """`simulate.response` of the modes to steps.

    With u the level of a piece and x a mode's state at its start, x(s) = (x + u/p) exp(p s) - u/p, or x + u s where the
    pole is at the origin.
    """
    start, level = steps.arriving(dead_time)
    length = np.diff(start)
    flat = np.zeros((len(start), 3))
    flat[:, 0] = modes.direct * level
    moving = [i for i, pole in enumerate(modes.poles.tolist()) if pole]
    amounts = np.zeros((len(start), len(moving)), complex)
    for i, (pole, residue) in enumerate(zip(modes.poles.tolist(), modes.residues.tolist(), strict=True)):
        if pole == 0:
            state = np.concatenate([[0.0], np.cumsum(level[:-1] * length)])
            flat[:, 0] += residue.real * state
            flat[:, 1] += residue.real * level
            continue
        held = np.expm1(pole * length) / pole * level[:-1]
        grown = np.exp(pole * length)
        states = [0j]
        for drive, factor in zip(held.tolist(), grown.tolist(), strict=True):
            states.append(factor * states[-1] + drive)
        amounts[:, moving.index(i)] = residue * (np.array(states) + level / pole)
        flat[:, 0] -= (residue * level / pole).real
    if modes.double:
        once = np.concatenate([[0.0], np.cumsum(level[:-1] * length)])
        twice = np.concatenate([[0.0], np.cumsum(length * (once[:-1] + length * level[:-1] / 2))])
        flat += modes.double * np.column_stack([twice, once, level / 2])
    return Pieces(start, flat, modes.poles[moving], amounts)


def friction_pieces(
    steps: Steps, end: float, start: float, time_constant: float, friction: tuple[float, float], dead_time: float
) -> Pieces:
    """`friction.friction_response`: place + final s - (speed - final) T (exp(-s/T) - 1) in each phase.

    `end` is the run's, s; `start` the steady command before it from the operating command.
    """
    times, levels = steps.arriving(dead_time)
    begin, speed, final, place = friction_phases(times, levels + start, end, time_constant, friction)
    away = (speed - final) * time_constant
    flat = np.column_stack([place + away, final, np.zeros(len(begin))])
    return Pieces(begin, flat, np.array([-1.0 / time_constant + 0j]), -away[:, None].astype(complex))


def power_piece(power: int, factor: float = 1.0) -> Pieces:
    """factor t^power over the whole run; power up to two."""
    flat = np.zeros((1, 3))
    flat[0, power] = factor
    return Pieces(np.zeros(1), flat, np.zeros(0, complex), np.zeros((1, 0), complex))


def wave_piece(pole: complex, amount: complex, begins: float = 0.0) -> Pieces:
    """Re(amount exp(pole (t - begins))) over the whole run."""
    turned = amount * np.exp(-pole * begins)
    return Pieces(np.zeros(1), np.zeros((1, 3)), np.array([pole], complex), np.array([[turned]], complex))
