"""What is seen of a held-out step: predicted and measured against closed forms."""

import numpy as np
import pytest
import step_sums
from gainwright.design.closing.prediction import predict
from gainwright.design.closing.sight import see
from gainwright.ident.catalogue import INTEGRATOR, RESONANCE
from gainwright.ident.identify import identify
from gainwright.ident.run import Run

TIME = 0.05 * np.arange(600)
FIT, FRESH = ((2.0, 1.0), (12.0, -1.0), (22.0, 0.5)), ((4.0, -1.0), (16.0, 0.5))


def log(step, seed, *, profile=FRESH, gain=2.0, noise=0.02):
    """White-ish noise (rho 0.5) on the closed form, dead time 0.2 s, level 5."""
    command = step_sums.steps(TIME, profile, 0.0)
    clean = step_sums.response(step, gain, 0.2, TIME, command, 0.0)
    return Run("fresh", TIME, command, 5.0 + clean + step_sums.coloured(np.random.default_rng(seed), 600, noise, 0.5))


def overshoot(damping):
    """exp(-pi z/sqrt(1 - z^2))."""
    return np.exp(-np.pi * damping / np.sqrt(1 - damping**2))


def looked_at(run, fit, band=0.05):
    """By name."""
    found = predict(run, fit)
    step = see(run, fit, found.predicted, found.runs, band)
    return step, {sight.name: sight for sight in step.sights}


@pytest.fixture(scope="module")
def fit():
    """3 rad/s, damping 0.5, gain 2."""
    return identify([log(step_sums.resonance(3.0, 0.5), 1, profile=FIT)], structures=[RESONANCE])


def test_overshoot_and_final_value_stand_side_by_side(fit):
    """Fitted damping 0.5 (16.3 %), the run's 0.3 (37.2 %) and 10 % more gain: each side tells its own and holds it."""
    step, sights = looked_at(log(step_sums.resonance(3.0, 0.3), 2, gain=2.2), fit)
    assert (step.moved, step.start, step.end) == ("command", -1.0, 0.5)
    peak = sights["overshoot"]
    assert peak.predicted == pytest.approx(overshoot(0.5), abs=0.02)
    assert peak.predicted_interval[0] < overshoot(0.5) < peak.predicted_interval[1]
    assert peak.measured == pytest.approx(overshoot(0.3), abs=0.03)
    assert peak.measured_interval[0] < overshoot(0.3) < peak.measured_interval[1]
    final = sights["final value"]
    assert final.predicted == pytest.approx(3.0, abs=0.03)
    assert final.measured == pytest.approx(3.3, abs=0.03)
    assert final.measured_interval[1] - final.measured_interval[0] < 0.05


def test_rise_and_settling_follow_the_second_order(fit):
    """w Ts(2 %) = 8.076 and w tr = 1.638 at damping 0.5 (SO-11; tables), the dead time on top of settling only."""
    _, sights = looked_at(log(step_sums.resonance(3.0, 0.5), 3, noise=0.004), fit, band=0.02)
    assert sights["rise time"].predicted == pytest.approx(1.638 / 3.0, rel=0.05)
    assert sights["rise time"].measured == pytest.approx(1.638 / 3.0, rel=0.05)
    assert sights["settling time"].predicted == pytest.approx(8.076 / 3.0 + 0.2, rel=0.05)
    assert sights["settling time"].measured == pytest.approx(8.076 / 3.0 + 0.2, rel=0.08)


def test_measured_intervals_hold_the_truth(fit):
    """24 records: 95 % of 24 final values; fewer than 20 inside has a chance of 0.5 %."""
    inside = 0
    for seed in range(24):
        _, sights = looked_at(log(step_sums.resonance(3.0, 0.5), 50 + seed), fit)
        low, high = sights["final value"].measured_interval
        inside += low < 3.0 < high
    assert inside >= 20


def test_a_settling_that_noise_hides_is_not_told(fit):
    """Noise of 20 % of the step against a band of 2 %."""
    _, sights = looked_at(log(step_sums.resonance(3.0, 0.5), 4, noise=0.3), fit, band=0.02)
    assert sights["settling time"].measured is None


def test_an_integrating_plant_shows_how_far_it_moved():
    """0.8 mm/s per V for 14 s at 0.5 V, 0.2 s late: 5.5 mm from the response just before the step."""
    fit = identify([log(step_sums.integrator(), 5, profile=FIT, gain=0.8)], structures=[INTEGRATOR])
    step, sights = looked_at(log(step_sums.integrator(), 6, profile=((4.0, -1.0), (16.0, 0.5)), gain=0.8), fit)
    assert list(sights) == ["final value"]
    assert (step.start, step.end) == (-1.0, 0.5)
    assert sights["final value"].measured == pytest.approx(sights["final value"].predicted, abs=0.2)


def test_a_run_without_a_step_shows_none(fit):
    """The command never moves."""
    run = log(step_sums.resonance(3.0, 0.5), 7, profile=())
    found = predict(run, fit)
    assert see(run, fit, found.predicted, found.runs, 0.05) is None
