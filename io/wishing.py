"""Wished closed-loop poles held against the locus of the gains that were chosen."""

import math
from collections.abc import Sequence
from dataclasses import replace

from ..design.compensator import open_loop
from ..design.designed import Design, GainInterval
from ..design.locus.condition import working
from ..design.locus.loop import OpenLoop
from ..design.locus.nearest import ask
from .outcome import Outcome
from .wish import Answer, Wish


def with_wishes(outcome: Outcome, wishes: Sequence[Wish]) -> Outcome:
    """A finished job with the answers to the wishes; where nothing was designed they have no more than the wish."""
    if outcome.fit is None or outcome.design is None:
        return replace(outcome, wishes=tuple(Answer(wish) for wish in wishes))
    loop = open_loop(outcome.design.gains, outcome.fit.plant, outcome.rig.setting)
    return replace(outcome, wishes=tuple(_answer(loop, outcome.design, wish) for wish in wishes))


def _answer(loop: OpenLoop, design: Design, wish: Wish) -> Answer:
    found = ask(loop, wish.point)
    gain, selection = found.nearest.loop_gain, design.selection
    stated = 0.0 < found.point.loop_gain < math.inf
    asked = 0.0 < gain < math.inf
    return Answer(
        wish,
        found,
        working(loop, found.point.point) if stated else None,
        _within(selection.intervals, gain) if asked else None,
        _within(selection.intervals_plausible, gain) if asked else None,
    )


def _within(intervals: Sequence[GainInterval], gain: float) -> bool:
    return any((low or 0.0) <= gain and (high is None or gain <= high) for low, high in intervals)
