"""Moves of the command without an answer: what friction or play swallows is told, what else is missed holds."""

import numpy as np
import pytest
from gainwright.ident.health.unanswered import see_unanswered

INTERVAL, LAG = 0.01, 0.1


def levels(values, each=1.5):
    """Command at every sample, each level held for `each` seconds."""
    return np.repeat(np.array(values, dtype=float), round(each / INTERVAL))


def play(command, band):
    """What gets through a play of this half width, written out."""
    at, out = command[0], []
    for u in command:
        at = min(max(at, u - band), u + band)
        out.append(at)
    return np.array(out)


def answer(command, seed=0):
    """A lag of 2 mm/V and 0.1 s behind what got through, with noise of 0.01 mm."""
    keep, y, out = np.exp(-INTERVAL / LAG), 2.0 * command[0], []
    for u in command:
        out.append(y)
        y = keep * y + (1.0 - keep) * 2.0 * u
    return np.array(out) + 0.01 * np.random.default_rng(seed).standard_normal(len(out))


def seen(command, response):
    return see_unanswered(INTERVAL * np.arange(len(command)), command, response, "V")


def test_small_moves_back_that_a_play_swallows_are_told_and_hold_nothing():
    """A play of 0.3 V either way takes a move back of 0.5 V whole; 0.4 V further on the same way gets through."""
    command = levels([0.0, 4.0, 4.4, 3.9, -4.0, 0.0])
    (found,) = seen(command, answer(play(command, 0.3)))
    assert found.kind == "small moves back without an answer"
    assert found.refuses == "no"
    assert found.size.startswith("1 of 5 moves of the command, 0.5 V")


@pytest.mark.parametrize(
    ("values", "deaf"),
    [
        ([0.0, 4.0, 4.4, 0.0, -4.0, 0.0], 3),  # half of the command's movement, back
        ([0.0, 4.0, 3.5, 4.0, 3.5, -4.0, 0.0], 4),  # as small a move back had an answer before
        ([0.0, 1.0, 3.0, -3.0, 0.0], 2),  # no move back
    ],
    ids=["large", "answered before", "onwards"],
)
def test_what_friction_cannot_have_swallowed_still_holds(values, deaf):
    """One move is missed by an actuator that otherwise follows."""
    through = list(values)
    through[deaf] = through[deaf - 1]
    (found,) = seen(levels(values), answer(levels(through)))
    assert found.kind == "actuator did not follow"
    assert found.refuses == "holds"
