"""A held-out loop whose gains are known is run from its setpoint: against a loop run sample by sample elsewhere."""

from dataclasses import replace

import numpy as np
import pytest
from gainwright.design.closing.loop_run import predict_loop
from gainwright.design.discretise import law_from_gains
from gainwright.design.gains import Gains
from gainwright.design.requirements import ControllerSetting, Limits
from gainwright.ident.catalogue import LAG
from gainwright.ident.identify import identify
from gainwright.ident.run import Run
from known_loop import DEAD_TIME, GAIN, INTEGRAL, INTERVAL, PROPORTIONAL, run_loop

NOISE = 0.05
SETTING = ControllerSetting(INTERVAL, 0.0, ("PI",))
FREE = Limits()


def held_out(seed, law, **how):
    """A run of that loop as the program reads it."""
    made = run_loop(seed, noise=how.pop("noise", NOISE), **how)
    return Run("fresh", made.time, made.command, made.response, made.setpoint, "held", None, closed_loop=True, law=law)


@pytest.fixture(scope="module")
def law():
    """PI as the loop has it."""
    return law_from_gains(Gains("PI", PROPORTIONAL, INTEGRAL), INTERVAL)


@pytest.fixture(scope="module")
def fit(law):
    """From a run of the same loop."""
    found = identify([held_out(1, law)], structures=[LAG])
    assert abs(found.plant.static_gain / GAIN - 1.0) < 0.05
    return found


def test_the_free_run_is_the_loop_without_its_noise(fit, law):
    """The noise-free loop, computed in the kit; the logged, noisy command and response are not what is followed."""
    quiet = run_loop(3, noise=0.0).response
    found, how = predict_loop(held_out(3, law), fit, FREE, SETTING)
    assert "free run of the loop" in how
    assert np.sqrt(np.mean((found.predicted - quiet) ** 2)) < 0.02 * np.std(quiet)


def test_the_band_holds_the_noise_as_the_loop_passes_it_on(fit, law):
    """Of four fresh runs 95 % of the samples, within what 4,800 samples of slow errors scatter."""
    inside = []
    for seed in range(4, 8):
        run = held_out(seed, law)
        found, _ = predict_loop(run, fit, FREE, SETTING)
        inside.append((run.response > found.low) & (run.response < found.high))
    assert 0.92 < np.mean(inside) < 0.98


def test_noise_in_a_tight_loop_is_more_than_the_sensor_s(fit, law):
    """Peak of |S| above one: what is logged scatters more than the noise alone, and the band knows it.

    The loop's own noise is that of a long run at a constant setpoint, simulated in the kit.
    """
    found, _ = predict_loop(held_out(3, law), fit, FREE, SETTING)
    logged = float(np.std(run_loop(9, seconds=2000.0, size=0.0, noise=NOISE).response))
    half = float(np.median(found.high - found.predicted)) / 1.959964
    assert half == pytest.approx(logged, rel=0.08)
    assert logged > 1.02 * NOISE


def test_another_plant_shows_in_the_loop(fit, law):
    """Half as much gain again: outside the band."""
    run = held_out(3, law, gain=1.5 * GAIN)
    found, _ = predict_loop(run, fit, FREE, SETTING)
    assert np.mean((run.response > found.low) & (run.response < found.high)) < 0.9


def test_gains_that_did_not_make_the_command_are_said(fit, law):
    """Half the proportional gain stated: the logged command says otherwise, and the loop is not run with it."""
    other = law_from_gains(Gains("PI", 0.5 * PROPORTIONAL, INTEGRAL), INTERVAL)
    found, how = predict_loop(held_out(3, other), fit, FREE, SETTING)
    assert found is None
    assert "[runs.current]" in how


def test_what_keeps_the_loop_from_being_run_is_said(fit, law):
    """Unknown gains, a filter, a constant setpoint; an open loop is nothing to speak of."""
    run = held_out(3, law)
    assert "not known" in predict_loop(replace(run, law=None), fit, FREE, SETTING)[1]
    assert "filter" in predict_loop(run, fit, FREE, replace(SETTING, response_filter_time=0.1))[1]
    assert "never moves" in predict_loop(held_out(3, law, size=0.0), fit, FREE, SETTING)[1]
    assert predict_loop(replace(run, closed_loop=False), fit, FREE, SETTING) == (None, "")


def test_the_command_of_a_clamped_loop_stays_inside(fit, law):
    """Bounds 0.6 V about the rest: the free run rises more slowly than without them."""
    run = held_out(3, law)
    free, _ = predict_loop(run, fit, FREE, SETTING)
    bound, _ = predict_loop(run, fit, Limits(2.4, 3.6), SETTING)
    first = int(np.flatnonzero(run.setpoint != run.setpoint[0])[0])
    late = first + round(DEAD_TIME / INTERVAL) + 4
    moved = abs(bound.predicted[late] - run.setpoint[0]), abs(free.predicted[late] - run.setpoint[0])
    assert moved[0] < 0.7 * moved[1]
