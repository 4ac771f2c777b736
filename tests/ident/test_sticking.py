"""A valve that sticks is found and sized from the log alone; bent, drifting, coloured and coarse records show none."""

import numpy as np
import pytest
from gainwright.ident.identify import identify
from gainwright.ident.play import Valve, through_valve
from gainwright.ident.run import Run

GAIN, LAG, DEAD, INTERVAL = 2.0, 1.0, 0.4, 0.05
UP_AND_DOWN = (0.0, 5.0, -5.0, 3.0, 0.0, -3.0, 0.0)
DOUBLETS = (0.0, 4.0, -4.0, 0.0, -4.0, 4.0, 0.0, 2.0, -2.0, 0.0)


def levels(values, each=6.0):
    """Command at every sample, each level held for `each` seconds."""
    return np.repeat(values, round(each / INTERVAL))


def sweep():
    """A sine of 4 V whose frequency rises from 0.02 to 0.3 Hz in 120 s, after 6 s of rest, new at every sample."""
    time = INTERVAL * np.arange(round(120.0 / INTERVAL))
    rate = np.log(0.3 / 0.02) / 120.0
    return np.concatenate([np.zeros(120), 4.0 * np.sin(2 * np.pi * 0.02 / rate * np.expm1(rate * time))])


def random_levels():
    """Forty random levels of up to 4 V, 2 s each, after 6 s of rest."""
    return np.concatenate([np.zeros(120), levels(np.random.default_rng(5).uniform(-4.0, 4.0, 40), 2.0)])


def stem(command, stick, slide):
    """The true valve, written out: it moves when the command is more than `stick` away, to `slide` short of it."""
    at, out = command[0], []
    for u in command:
        if abs(u - at) > stick:
            at = u - slide if u > at else u + slide
        out.append(at)
    return np.array(out)


def record(command, *, stick=0.0, slide=0.0, bend=0.0, noise=0.02, memory=0.0, drift=0.0, step=0.0, seed=0):
    """A lag of 2 mm/V and 1 s behind 0.4 s of dead time, run exactly between samples."""
    generator = np.random.default_rng(seed)
    moved = stem(command, stick, slide) if stick else command
    drive = GAIN * moved * (1.0 + bend * moved)
    whole = round(DEAD / INTERVAL)
    drive = np.concatenate([np.full(whole, drive[0]), drive])[: command.size]
    keep, y, response = np.exp(-INTERVAL / LAG), drive[0], []
    for value in drive:
        response.append(y)
        y = keep * y + (1.0 - keep) * value
    white = generator.standard_normal(command.size)
    coloured = np.empty(command.size)
    state = 0.0
    for i, w in enumerate(white):
        state = memory * state + np.sqrt(1.0 - memory**2) * w
        coloured[i] = state
    walk = np.cumsum(generator.standard_normal(command.size)) * drift / np.sqrt(command.size)
    reading = 50.0 + np.array(response) + noise * coloured + walk
    reading = np.round(reading / step) * step if step else reading
    return Run("made", INTERVAL * np.arange(command.size), command, reading)


@pytest.mark.parametrize(
    "command",
    [levels(UP_AND_DOWN), levels(DOUBLETS), random_levels(), sweep()],
    ids=["steps", "doublets", "random", "sweep"],
)
def test_a_valve_that_sticks_is_found_and_what_it_does_lies_within_the_draws(command):
    """Stick 0.3 V, slide 0.15 V: where it rests and what it takes to move it both lie inside 95 % of the draws."""
    fit = identify([record(command, stick=0.3, slide=0.15)])
    assert fit.sticking is not None
    low, high = np.quantile(fit.plausible.valves, [0.025, 0.975], axis=0)
    assert low[0] < 0.3 < high[0]
    assert 0.5 * 0.15 < fit.sticking.valve.short < 0.3
    gain = fit.parameters[0]
    assert abs(gain.value - GAIN) < 0.02 * GAIN


def test_after_clean_steps_the_place_of_rest_is_sharp_and_the_band_is_left_open():
    """Large steps show 0.15 V within its interval; of the band they only tell that it is no smaller than that."""
    fit = identify([record(levels(UP_AND_DOWN), stick=0.3, slide=0.15, noise=0.01, seed=3)])
    assert abs(fit.sticking.valve.short - 0.15) < 2.5 * fit.sticking.short_error
    assert fit.sticking.short_error < 0.03
    assert np.ptp(fit.sticking.weights) < 1e-9


@pytest.mark.parametrize("seed", [1, 2])
def test_noise_that_could_be_taken_for_drift_does_not_hide_the_valve_or_its_size(seed):
    """One step up, down and back, noise with memory: 0.12 V is found, within three standard errors of under 0.03 V."""
    fit = identify([record(levels((0.0, 4.0, -4.0, 0.0)), stick=0.25, slide=0.12, noise=0.08, memory=0.85, seed=seed)])
    assert fit.sticking is not None
    assert fit.sticking.short_error < 0.03
    assert abs(fit.sticking.valve.short - 0.12) < 3.0 * fit.sticking.short_error


def test_moves_that_got_through_bound_the_band():
    """Steps of 0.25 V to and fro all got through a valve that rests 0.05 V short: a band of 0.25 V is ruled out."""
    small = np.concatenate([np.zeros(120), levels([2.0, 1.75, 2.0, 1.75, 2.0, 0.0, -2.0, -1.75, -2.0, 0.0], 6.0)])
    fit = identify([record(small, stick=0.1, slide=0.05, noise=0.01)])
    assert fit.sticking is not None
    assert np.quantile(fit.plausible.valves[:, 0], 0.99) < 0.25


@pytest.mark.parametrize(
    "imperfect",
    [
        {},
        {"bend": 0.02},
        {"bend": -0.02, "drift": 0.3},
        {"drift": 0.5},
        {"memory": 0.95, "noise": 0.1},
        {"step": 0.1},
    ],
    ids=["clean", "bent", "bent and drifting", "drifting", "coloured", "coarse"],
)
@pytest.mark.parametrize("command", [levels(UP_AND_DOWN), random_levels()], ids=["steps", "random"])
def test_no_valve_is_seen_where_none_is(imperfect, command):
    """A gain that changes by a tenth either way, a level that wanders, memory of a second, a coarse converter."""
    fit = identify([record(command, seed=11, **imperfect)])
    assert fit.sticking is None
    assert fit.plausible.valves is None


def test_the_logged_command_stays_as_it_was_logged():
    """The fit keeps the command of the log, not what got through."""
    run = record(levels(UP_AND_DOWN), stick=0.3, slide=0.15)
    assert np.array_equal(identify([run]).runs[0].command, run.command)


def test_play_and_stick_follow_the_definition_sample_by_sample():
    """Against the valve written out in this file, on a random walk; a band of nothing lets everything through."""
    command = np.cumsum(np.random.default_rng(2).normal(0.0, 0.2, 2000))
    assert np.allclose(through_valve(command, command[0], 0.5, 0.2), stem(command, 0.5, 0.2), atol=0.0)
    run = Run("made", INTERVAL * np.arange(2000), command, command)
    assert Valve().through(run) is run
