"""The log of rung 0, the loop open: did the response move the right way, and far enough?"""

from dataclasses import dataclass

import numpy as np

from ...ident.run import FloatArray, Run
from .rung import Advice, RungRun

_MOVED = 0.5  # of the command's move that the ladder asks for: a smaller one shows too little
_TOO_FAR = 2.0  # times the move to expect: a unit or a gain is wrong
_NEAR = 0.08  # of the time given, either side of its end: where the move is read


@dataclass(frozen=True, eq=False)
class OpeningAsked:
    """What the ladder says of its foot.

    Attributes
    ----------
    command_move : float, command unit
    moves : float, response unit
        Expected after `within`, sign included.
    at_least : float, response unit
    within : float, s
    time, low, high : (n,) arrays; s, and response unit from the start of the move
        The 99.9 % band.
    """

    command_move: float
    moves: float
    at_least: float
    within: float
    time: FloatArray
    low: FloatArray
    high: FloatArray


def judge_opening(run: Run, asked: OpeningAsked) -> RungRun:
    """Hold an open-loop log with one move of the command against the foot of the ladder.

    Parameters
    ----------
    run : Run
        At rest before the command moves.
    """
    moved = run.command - run.command[0]
    there = np.flatnonzero(np.abs(moved) > _MOVED * abs(asked.command_move))
    first = int(there[0]) if there.size else 0
    since = run.time - run.time[first]
    ratio = float(moved[first] / asked.command_move)
    start = run.response[: max(first, 1)]
    before = float(np.nanmean(start)) if np.isfinite(start).any() else float("nan")
    watched = (since >= 0.0) & (since <= asked.within) & run.valid
    low, high = (before + ratio * np.interp(since, asked.time, edge) for edge in (asked.low, asked.high))
    low, high = np.minimum(low, high), np.maximum(low, high)
    outside = watched & ((run.response < low) | (run.response > high))
    share = float(outside.sum() / watched.sum()) if watched.any() else 1.0
    advice, why = _advice(run, asked, since, before, ratio) if first else ("repeat", _too_small(moved, asked))
    middle = 0.5 * (low + high)
    return RungRun(run.label, run.time, run.response, run.command, run.response, middle, low, high, share, advice, why)


def _too_small(moved: FloatArray, asked: OpeningAsked) -> str:
    most = float(np.abs(moved).max())
    return f"the command moves by {most:.3g} from rest in this log, and rung 0 asks for {abs(asked.command_move):.3g}"


def _advice(run: Run, asked: OpeningAsked, since: FloatArray, before: float, ratio: float) -> tuple[Advice, str]:
    read = np.abs(since - asked.within) <= _NEAR * asked.within
    seen = run.response[read & run.valid]
    if not seen.size or not np.isfinite(before):
        return "repeat", f"the log does not show the response {asked.within:.3g} s after the move and at rest before it"
    moved, expected = float(seen.mean()) - before, asked.moves * ratio
    told = f"the response moved by {moved:.3g} in {asked.within:.3g} s, and {expected:.3g} was expected"
    if moved * np.sign(expected) < asked.at_least * abs(ratio):
        way = "the other way" if moved * expected < 0.0 else "too little"
        return "stop", f"{told}: {way}; wiring, sign or unit is wrong"
    if abs(moved) > _TOO_FAR * abs(expected):
        return "stop", f"{told}: far too much; a unit, a gain or a range is wrong"
    return "climb", told
