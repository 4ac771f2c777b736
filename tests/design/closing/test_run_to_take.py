"""The run to take where one could not be compared: inside every limit, long enough, never on the resonance."""

import re

import numpy as np
import pytest
import step_sums
from gainwright.design.closing.run_to_take import run_to_take
from gainwright.design.closing.words import Units
from gainwright.design.requirements import Limits
from gainwright.ident.catalogue import INTEGRATOR, LAG, RESONANCE
from gainwright.ident.identify import identify
from gainwright.ident.run import Run

TIME, VOLT = 0.1 * np.arange(200), Units("V", "mm")
FIT = ((2.0, 1.0), (8.0, -1.0), (14.0, 0.5))
WIDE = Limits(-10.0, 10.0, None, float("-inf"), float("inf"), float("inf"))


def log(step, gain, profile=FIT):
    """Level 5 mm, operating command 0 V, dead time 0.3 s."""
    command = step_sums.steps(TIME, profile, 0.0)
    noise = step_sums.coloured(np.random.default_rng(1), len(TIME), 0.02, 0.7)
    return Run("log", TIME, command, 5.0 + step_sums.response(step, gain, 0.3, TIME, command, 0.0) + noise)


@pytest.fixture(scope="module")
def lag():
    """Gain 2 mm/V, 1 s."""
    return identify([log(step_sums.lag(1.0), 2.0)], structures=[LAG])


def number(pattern, text):
    """The first number that the pattern catches."""
    return float(re.search(pattern, text).group(1))


SMALL = log(step_sums.lag(1.0), 2.0, ((3.0, 0.5), (9.0, -0.5), (15.0, 0.0)))


def test_steps_grow_by_what_is_lacking_and_are_held_until_all_is_seen(lag):
    """0.5 V and three times too little: 1.5 V, each for four lags and the dead time, rest before and after."""
    text = run_to_take(SMALL, lag, WIDE, VOLT, lacking=3.0)
    assert number(r"steps either way of ([\d.]+) V", text) == pytest.approx(1.5)
    assert number(r"held for ([\d.]+) s", text) == pytest.approx(4.3, rel=0.05)
    assert "at rest for" in text
    assert "limits allow no larger" not in text


@pytest.mark.parametrize(
    "limits",
    [Limits(-10.0, 1.2, None, -50.0, 50.0, None), Limits(-10.0, 10.0, None, 3.0, 50.0, None)],
    ids=["command", "response"],
)
def test_no_step_leaves_the_limits_and_more_of_them_make_up_for_it(lag, limits):
    """Room of 1.2 V upwards, or of 2 mm downwards (1 V at 2 mm/V): four fifths of it, and more than four steps."""
    text = run_to_take(SMALL, lag, limits, VOLT, lacking=3.0)
    size = number(r"steps either way of ([\d.]+) V", text)
    room = 1.2 if limits.command_highest == 1.2 else 1.0
    assert size == pytest.approx(0.8 * room, rel=0.05)
    assert "limits allow no larger" in text
    assert number(r"with (\d+) steps", text) == pytest.approx(4 * (1.5 / size) ** 2, abs=1.0)


def test_a_lightly_damped_plant_is_never_dwelt_on_its_resonance():
    """4 rad/s, damping 0.1: an open-loop step overshoots by 73 %, and the response's limit knows it."""
    fit = identify([log(step_sums.resonance(4.0, 0.1), 2.0)], structures=[RESONANCE])
    bounded = Limits(-10.0, 10.0, None, 0.0, 10.0, None)
    text = run_to_take(SMALL, fit, bounded, VOLT, lacking=50.0)
    assert number(r"never dwell at ([\d.]+) rad/s", text) == pytest.approx(4.0, rel=0.02)
    peak = 1.0 + np.exp(-np.pi * 0.1 / np.sqrt(1 - 0.01))
    assert number(r"steps either way of ([\d.]+) V", text) == pytest.approx(0.8 * 5.0 / (2.0 * peak), rel=0.05)


def test_an_integrating_plant_gets_pulses_that_give_back_what_they_took():
    """It has no place to settle."""
    fit = identify([log(step_sums.integrator(), 0.8)], structures=[INTEGRATOR])
    assert "pulses either way that give back what they took" in run_to_take(SMALL, fit, WIDE, VOLT)


def test_a_command_that_never_moved_is_given_steps_that_stand_out_of_the_noise(lag):
    """20 times 0.02 mm at 2 mm/V: 0.2 V."""
    still = log(step_sums.lag(1.0), 2.0, ())
    size = number(r"steps either way of ([\d.]+) V", run_to_take(still, lag, WIDE, VOLT))
    assert size == pytest.approx(20 * 0.02 / 2.0, rel=0.3)
