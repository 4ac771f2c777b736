"""Every gain that works, none missed: random requirement sets against a dense, independent look at the loop.

The thousand: `python -P tests/design/sets/thousand.py`.
"""

import numpy as np
import pytest
from dense_loop import curve
from gainwright.design.requirements import Requirement
from random_sets import draw_case, look, sets_of
from scipy.optimize import brentq


def test_a_few_random_requirement_sets_have_no_gain_wrong():
    """The short form: some ten sets of stable and unstable plants and of two integrators, several with islands."""
    looked = [found for seed in range(14) if (found := look(seed)) is not None]
    assert len(looked) >= 8
    assert [found.wrong for found in looked if found.wrong] == []
    assert any(found.several for found in looked)


def test_the_edges_of_margins_are_exact():
    """At each edge of a phase-margin interval the loop crosses at that margin: 1e-7 deg, own frequency response."""
    checked = 0
    asked = (Requirement("phase_margin", 40.0, "at_least", "deg"),)
    for seed in range(14):
        case = draw_case(np.random.default_rng([41, seed]))
        for low, high in dict(sets_of(case, asked).rows)["phase_margin"]:
            for edge in (low, high):
                margin = None if not edge else least_margin(case, edge)
                if margin is not None and margin < 60.0:
                    assert margin == pytest.approx(40.0, abs=1e-7)
                    checked += 1
    assert checked >= 5


def least_margin(case, gain):
    """Least |angle(-L)| over all gain crossings, each solved to rounding; None where there is none."""
    w = np.geomspace(1e-4, np.pi / case.interval * 0.999999, 3000)
    level = np.log(gain * np.abs(curve(case, w)))
    found = []
    for i in np.flatnonzero(level[1:] * level[:-1] < 0.0):
        at = brentq(
            lambda x: np.log(gain * abs(curve(case, np.array([x]))[0])), w[i], w[i + 1], xtol=1e-300, rtol=1e-15
        )
        found.append(abs(np.degrees(np.angle(-curve(case, np.array([at]))[0]))))
    return min(found, default=None)
