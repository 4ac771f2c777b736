"""A drive with dry friction against a march in small steps that knows only the law of motion."""

import numpy as np
import pytest
import step_sums
from gainwright.ident.friction import friction_response, rough_free_run
from gainwright.ident.identify import identify
from gainwright.ident.plant import Plant
from gainwright.ident.run import Run
from gainwright.ident.simulate import free_run, grid_of


def march(time, command, before, time_constant, friction, dead_time, parts):
    """Position at the samples: T v' = u - c sign(v) - v, held at rest while -backward <= u <= forward.

    Small steps, each an exact lag towards the level that friction leaves; a step that would pass through rest ends
    there. Its error is of the order of one small step.
    """
    forward, backward = friction
    h = (time[1] - time[0]) / parts
    keep = np.exp(-h / time_constant)
    speed = place = 0.0
    out = np.zeros(len(time))
    for j in range((len(time) - 1) * parts):
        arrived = int(np.floor((j * h - dead_time) / (time[1] - time[0]) + 1e-9))
        u = command[arrived] if arrived >= 0 else before
        if speed == 0.0 and -backward <= u <= forward:
            new = 0.0
        else:
            way = np.sign(speed) if speed else np.sign(u)
            target = u - forward if way > 0 else u + backward
            new = target + (speed - target) * keep
            if new * way < 0:
                new = 0.0
        place += 0.5 * h * (speed + new)
        speed = new
        if (j + 1) % parts == 0:
            out[(j + 1) // parts] = place
    return out


TIME = 0.05 * np.arange(240)
# forward, coasting to rest inside the friction band, straight reversals, a level that only slows it, one that is stuck
PROFILE = ((0.5, 3.0), (2.0, 0.4), (4.0, -2.0), (5.5, 2.5), (6.5, 1.1), (8.0, 0.0), (9.0, -0.6), (10.0, -1.5))


@pytest.mark.parametrize("friction", [(1.0, 1.0), (0.7, 1.3), (0.0, 0.9)], ids=["even", "uneven", "one way only"])
@pytest.mark.parametrize("dead_time", [0.0, 0.13])
def test_the_closed_form_is_the_limit_of_small_steps(friction, dead_time):
    """Error below a thousandth of the way, and falling with the step: halved steps at least nearly halve it."""
    command = step_sums.steps(TIME, PROFILE, 0.0)
    run = Run("drive", TIME, command, np.zeros(240))
    got = friction_response(grid_of(run), 0.0, 0.4, friction, dead_time)
    # 50 and 100 parts of 50 ms: dead time is a whole number of both
    errors = [np.max(np.abs(march(TIME, command, 0.0, 0.4, friction, dead_time, n) - got)) for n in (50, 100)]
    assert errors[1] < 1e-3 * np.ptp(got)
    assert errors[1] < 0.7 * errors[0] + 1e-9


def test_friction_is_no_small_thing_here():
    """The comparison can fail: without friction the drive ends elsewhere by a fifth of its way."""
    command = step_sums.steps(TIME, PROFILE, 0.0)
    grid = grid_of(Run("drive", TIME, command, np.zeros(240)))
    rough, smooth = (friction_response(grid, 0.0, 0.4, (c, c), 0.13) for c in (1.0, 0.0))
    assert np.max(np.abs(rough - smooth)) > 0.2 * np.ptp(rough)


def test_without_friction_it_is_the_plain_free_run():
    """No friction: an integrator with lag, from rest, as a textbook has it."""
    command = step_sums.steps(TIME, PROFILE, 0.0)
    run = Run("drive", TIME, command, np.zeros(240))
    expected = 7.0 + step_sums.response(step_sums.integrator_with_lag(0.4), -2.0, 0.13, TIME, command, 0.0)
    plant = Plant((-2.0,), (0.4, 1.0, 0.0), 0.13)
    assert rough_free_run(plant, run, 0.0, 7.0, (0.0, 0.0)) == pytest.approx(free_run(plant, run, 0.0, 7.0))
    assert 7.0 - 2.0 * friction_response(grid_of(run), 0.0, 0.4, (0.0, 0.0), 0.13) == pytest.approx(expected, abs=1e-9)


@pytest.mark.parametrize("gain", [2.0, -2.0])
def test_friction_is_recognised_and_its_size_lies_in_its_interval(gain):
    """Noise 1 % of the movement: structure by name, each number within four standard errors, friction to 15 %."""
    rng = np.random.default_rng(3)
    command = step_sums.steps(TIME, PROFILE, 0.0)
    clean = gain * march(TIME, command, 0.0, 0.4, (0.7, 1.0), 0.1, 40)
    noisy = 5.0 + clean + step_sums.coloured(rng, 240, 0.01 * np.std(clean), 0.5)
    fit = identify([Run("drive", TIME, command, noisy)])
    assert fit.structure == "integrator with lag and friction"
    truth = {"gain": gain, "dead time": 0.1, "time constant": 0.4, "friction forward": 0.7, "friction backward": 1.0}
    for parameter in fit.parameters:
        assert abs(parameter.value - truth[parameter.name]) < 4 * parameter.std_error, parameter
    assert fit.friction == pytest.approx((0.7, 1.0), rel=0.15)
    assert np.median(fit.plausible.stiction) > 0.5


def test_a_drive_without_friction_is_not_given_any():
    """The plain structure is among the chosen or tied ones where nothing sticks."""
    rng = np.random.default_rng(4)
    command = step_sums.steps(TIME, PROFILE, 0.0)
    clean = step_sums.response(step_sums.integrator_with_lag(0.4), 2.0, 0.1, TIME, command, 0.0)
    fit = identify([Run("drive", TIME, command, clean + step_sums.coloured(rng, 240, 0.01 * np.std(clean), 0.5))])
    assert fit.structure == "integrator with lag"
    assert max(fit.friction) == 0.0
