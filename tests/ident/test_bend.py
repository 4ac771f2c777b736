"""A gain that differs along the command: made by small steps outside the program, found, and handed on."""

from dataclasses import replace

import numpy as np
import pytest
from gainwright.design.local_gain import at_local_gains, commands_of_step
from gainwright.design.requirements import Requirements
from gainwright.ident.bend import Bend, bent, curved, slope_at
from gainwright.ident.identify import identify
from gainwright.ident.run import Run

LEVELS = (0.0, 1.0, -1.0, 0.5, -0.5, 0.0, 0.8, 0.0)
GAIN, LAG, REST, LEVEL = 3.0, 0.4, 5.0, 20.0


def record(bend, levels=LEVELS, noise=0.02, seed=3):
    """A lag behind u + bend (u - rest)^2, by exact sampling; white noise."""
    interval, each = 0.02, 120
    command = np.repeat(np.array(levels), each)
    driving = command + bend * command**2
    decay, state, response = np.exp(-interval / LAG), 0.0, []
    for value in driving:
        response.append(state)
        state = decay * state + GAIN * (1.0 - decay) * value
    noisy = LEVEL + np.array(response) + noise * np.random.default_rng(seed).standard_normal(len(command))
    return Run("made", interval * np.arange(len(command)), REST + command, noisy)


@pytest.mark.parametrize("bend", [0.12, -0.08])
def test_a_bend_is_found_with_its_size(bend):
    fit = identify([record(bend)])
    assert fit.bend is not None
    assert abs(fit.bend.bend - bend) < 3.5 * fit.bend.error
    assert fit.bend.error < 0.1 * abs(bend)
    gain = fit.parameters[0]
    assert gain.low <= GAIN <= gain.high  # at the operating command


def test_a_straight_plant_has_none():
    assert identify([record(0.0)]).bend is None


def test_two_levels_tell_no_bend():
    """Between two levels any curve is a straight line."""
    assert identify([record(0.12, levels=(0.0, 1.0, 0.0, 1.0, 0.0))]).bend is None


def test_the_commands_stay_as_they_were_logged():
    run = record(0.12)
    assert np.array_equal(identify([run]).runs[0].command, run.command)


def test_the_model_follows_a_fresh_run_through_the_curve():
    fit, fresh = identify([record(0.12)]), record(0.12, levels=(0.0, -0.9, 0.9, 0.0), noise=0.0, seed=4)
    driving = fit.through(fresh).command - REST
    expected = (fresh.command - REST) + 0.12 * (fresh.command - REST) ** 2
    assert np.abs(driving - expected).max() < 0.01


def test_the_curve_goes_straight_on_where_its_slope_has_fallen_to_a_third():
    """At b = -1/2 and u = 2/3 the slope 1 + 2 b u is 1/3, and u + b u^2 = 4/9."""
    moves = np.array([2.0 / 3.0, 2.0 / 3.0 + 0.3])
    assert curved(np.full(2, -0.5), moves) == pytest.approx([4.0 / 9.0, 4.0 / 9.0 + 0.1], abs=1e-12)
    assert slope_at(np.full(2, -0.5), moves) == pytest.approx([1.0 / 3.0, 1.0 / 3.0])


def test_a_run_before_the_curve_keeps_its_response():
    run = record(0.1)
    assert bent(run, REST, 0.1).response is run.response


def test_the_plausible_plants_have_every_gain_on_the_way_of_the_step():
    """From the operating command to where u + b u^2 = step / gain; the slope there is sqrt(1 + 4 b step / gain)."""
    fit = identify([record(0.12)])
    asked = Requirements(test_step=2.4)
    low, high = commands_of_step(fit, fit.bend, asked)
    gain, bend = fit.plant.static_gain, fit.bend.bend
    assert low == 0.0
    assert high + bend * high**2 == pytest.approx(2.4 / gain, rel=1e-12)
    local = at_local_gains(fit.plausible, fit, asked)
    slopes = local.curves[:, 1]
    assert slopes.min() == pytest.approx(1.0, abs=0.01)
    assert slopes.max() == pytest.approx(np.sqrt(1.0 + 4.0 * bend * 2.4 / gain), abs=0.02)
    back = local.straight
    assert back.curves is None
    assert [p.static_gain for p in back.plants] == pytest.approx([p.static_gain for p in fit.plausible.plants])


def test_the_way_of_a_step_in_both_directions():
    fit = identify([record(0.0)])
    bend = Bend(REST, 0.1, 0.01, 1.0, 50.0)
    low, high = commands_of_step(replace(fit, bend=bend), bend, Requirements(test_step=1.5, both_directions=True))
    assert low < 0.0 < high
    assert abs(low) > high  # the gain is less on that side
