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
STILL = 2.0  # deviations that a response at rest may have moved from one quarter of its rest to the next
PLAY = 0.25  # of the command's whole movement: what friction or play may swallow when the command turns back


@dataclass(frozen=True)
class _Move:
    """One move of the command out of a settled rest.

    Attributes
    ----------
    at : int
        Index of its first sample.
    size : float
    turns : bool
        The other way than the move before it, or the first of all.
    answered_after : int or None
        Samples until the response had left its rest; None when it never did.
    lasts : int
    """

    at: int
    size: float
    turns: bool
    answered_after: int | None
    lasts: int


def see_unanswered(time: FloatArray, command: FloatArray, response: FloatArray, unit: str) -> tuple[Seen, ...]:
    """Moves without an answer, at least as large as one that was answered, and given three times as long.

    A small move back, where no smaller one back had an answer, is what friction or play swallows: it is told and no
    fault of the record.

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
    missed = [
        move
        for move in moves
        if move.answered_after is None and _larger(move, answered) and move.lasts > PATIENCE * (slowest + 2)
    ]
    span = float(np.ptp(command))
    held = [move for move in missed if _swallowed(move, answered, span)]
    left = [move for move in missed if move not in held]

    def told(those: list[_Move]) -> tuple[str, str]:
        where = ", ".join(f"{time[move.at]:.6g} s" for move in those[:5])
        largest = max(move.size for move in those)
        return where, f"{len(those)} of {len(moves)} moves of the command, {largest:.3g} {unit} at most"

    seen = []
    if left:
        action = "check the actuator, its supply and its limits; "
        action += "use the part in which it followed (from, to), or repeat"
        seen.append(Seen("actuator did not follow", *told(left), action, "holds"))
    if held:
        action = "friction or play may have swallowed them as the command turned back; nothing was changed"
        seen.append(Seen("small moves back without an answer", *told(held), action))
    return tuple(seen)


def _larger(move: _Move, answered: list[_Move]) -> bool:
    return move.size >= 0.9 * min(other.size for other in answered)


def _swallowed(move: _Move, answered: list[_Move], span: float) -> bool:
    back = [other for other in answered if other.turns]
    return move.turns and move.size <= PLAY * span and not (back and _larger(move, back))


def _moves(found: tuple[Rest, ...], level: float) -> list[_Move | None]:
    way, moves = 0.0, []
    for before, after in pairwise(found):
        now = float(np.sign(after.command - before.command))
        moves.append(_move(before, after, level, turns=now != way))
        way = now
    return moves


def _move(before: Rest, after: Rest, level: float, turns: bool) -> _Move | None:
    """None where the response had not settled, where stretches are missing between both, or the answer is unclear.

    A drive that moves steadily has not settled: a command that stops it leaves it where it was, and that is an answer.
    """
    end = before.end
    if before.last != after.first or len(end) < 5 or np.ptp(end) > 8.0 * level or before.still_moves > STILL * level:
        return None
    off = np.abs(after.response - np.median(end))
    size = abs(after.command - before.command)
    gone = np.flatnonzero(off > CLEAR * level)
    if len(gone) == 0:
        return _Move(after.first, size, turns, None, after.last - after.first)
    if np.nanmax(off) < FAR * level:
        return None
    return _Move(after.first, size, turns, int(gone[0]), after.last - after.first)
