"""Rung 0's log: the right way and far enough, by hand on straight ramps."""

import numpy as np
import pytest
from gainwright.design.closing.first_move import OpeningAsked, judge_opening
from gainwright.ident.run import Run

TIME = np.arange(0.0, 3.0, 0.01)
# the command moves by 0.4; within 0.5 s the response moves by 5, at least by 3; the band is 4 to 6 there
ASKED = OpeningAsked(0.4, 5.0, 3.0, 0.5, np.array([0.0, 0.5]), np.array([-0.5, 4.0]), np.array([0.5, 6.0]))


def judged(slope, command=0.4, until=3.0):
    """A response that rises by `slope` a second from 1 s on, when the command moves."""
    time = TIME[until > TIME]
    response = 100.0 + slope * np.clip(time - 1.0, 0.0, None)
    return judge_opening(Run("opening.csv", time, np.where(time >= 1.0, 2.0 + command, 2.0), response), ASKED)


@pytest.mark.parametrize(
    ("slope", "advice", "said"),
    [
        (10.0, "climb", "moved by 5"),
        (6.5, "climb", "moved by 3.2"),
        (5.0, "stop", "too little"),
        (-10.0, "stop", "the other way"),
        (0.0, "stop", "wiring, sign or unit"),
        (25.0, "stop", "far too much"),
    ],
)
def test_the_move_decides(slope, advice, said):
    """5 expected after half a second, 3 at least, 10 at most."""
    found = judged(slope)
    assert found.advice == advice, found.why
    assert said in found.why


def test_a_larger_move_of_the_command_is_judged_by_its_own_size():
    """Twice the command: 10 are expected, and 5 are too little."""
    assert judged(20.0, command=0.8).advice == "climb"
    assert judged(10.0, command=0.8).advice == "stop"


def test_a_log_that_shows_too_little_says_repeat():
    """A small move of the command, or an end before the time is up."""
    assert judged(10.0, command=0.1).advice == "repeat"
    assert judged(10.0, until=1.3).advice == "repeat"
