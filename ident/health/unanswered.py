"""An actuator that did not follow: moves of the command that leave the response where it was, while others move it."""

from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from ..run import FloatArray
from .noise_level import noise_level, quantum
from .rests import Rest, rests
from .seen import Seen

CLEAR = 6.0  # deviations of the noise: a response that has left its rest
FAR = 15.0  # deviations that an answer must reach to count as one
PATIENCE = 3.0  # times the slowest answer


@dataclass(frozen=True)
class _Move:
    """One move of the command out of a settled rest.

    Attributes
    ----------
    at : int
        Index of its first sample.
    size : float
    answered_after : int or None
        Samples until the response had left its rest; None when it never did.
    lasts : int
    """

    at: int
    size: float
    answered_after: int | None
    lasts: int


def see_unanswered(time: FloatArray, command: FloatArray, response: FloatArray, unit: str) -> tuple[Seen, ...]:
    """Moves without an answer, at least as large as one that was answered, and given three times as long.

    Parameters
    ----------
    time : (n,) array, s
    command : (n,) array, in `unit`
    response : (n,) array
        NaN where lost.
    """
    level = max(noise_level(response), quantum(response))
    if level == 0.0:
        level = 1e-9 * max(1.0, float(np.nanmax(np.abs(response))))
    moves = [move for move in _moves(rests(command, response), level) if move is not None]
    answered = [move for move in moves if move.answered_after is not None]
    if len(answered) < 2:
        return ()
    slowest = max(move.answered_after or 0 for move in answered)
    smallest = min(move.size for move in answered)
    missed = [
        move
        for move in moves
        if move.answered_after is None and move.size >= 0.9 * smallest and move.lasts > PATIENCE * (slowest + 2)
    ]
    if not missed:
        return ()
    return (
        Seen(
            "actuator did not follow",
            ", ".join(f"{time[move.at]:.6g} s" for move in missed[:5]),
            f"{len(missed)} of {len(moves)} moves of the command, {max(m.size for m in missed):.3g} {unit} at most",
            "check the actuator, its supply and its limits; use the part in which it followed (from, to), or repeat",
            "holds",
        ),
    )


def _moves(found: tuple[Rest, ...], level: float) -> list[_Move | None]:
    return [_move(before, after, level) for before, after in pairwise(found)]


def _move(before: Rest, after: Rest, level: float) -> _Move | None:
    """None where the response had not settled, where stretches are missing between both, or the answer is unclear."""
    end = before.end
    if before.last != after.first or len(end) < 5 or np.ptp(end) > 8.0 * level:
        return None
    off = np.abs(after.response - np.median(end))
    size = abs(after.command - before.command)
    gone = np.flatnonzero(off > CLEAR * level)
    if len(gone) == 0:
        return _Move(after.first, size, None, after.last - after.first)
    if np.nanmax(off) < FAR * level:
        return None
    return _Move(after.first, size, int(gone[0]), after.last - after.first)
