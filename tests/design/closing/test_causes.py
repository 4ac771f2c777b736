"""A gap is explained by its cause, with its size: a simulated pair each, truth from closed forms or the true rig."""

import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
import step_sums
from gainwright.design.closing.words import Units, cause_text, level_text
from gainwright.ident.catalogue import DRIVE_WITH_FRICTION, INTEGRATOR, LAG, RESONANCE
from gainwright.ident.causes import explain
from gainwright.ident.identify import identify
from gainwright.ident.run import Run

sys.path.insert(0, str(Path(__file__).resolve().parents[3] / "sample_runs"))
from true_rig import Sensor, TrueRig, open_loop
from true_rig.linear_stages import Gain, Integrator
from true_rig.rough_stages import FrictionDrive

TIME = 0.1 * np.arange(200)
FIT = ((2.0, 1.0), (8.0, -1.0), (14.0, 0.5))
FRESH = ((3.0, -1.0), (9.0, 0.6), (15.0, -0.3))
NOISE, VOLT = 0.02, Units("V", "mm")


def log(step, gain=2.0, dead_time=0.3, seed=1, *, profile=FRESH, level=5.0, drift=0.0, seen=lambda command: command):
    """First-order noise of rho 0.7; `seen` makes what reaches the plant of what was logged."""
    rng = np.random.default_rng(seed)
    command = step_sums.steps(TIME, profile, 0.0)
    clean = step_sums.response(step, gain, dead_time, TIME, seen(command), 0.0)
    noise = step_sums.coloured(rng, len(TIME), NOISE, 0.7)
    return Run("fresh", TIME, command, level + drift * TIME / TIME[-1] + clean + noise)


@pytest.fixture(scope="module")
def lag():
    """Gain 2, 1 s, dead time 0.3 s."""
    return identify([log(step_sums.lag(1.0), profile=FIT)], structures=[LAG])


@pytest.fixture(scope="module")
def swinging():
    """3 rad/s, damping ratio 0.3."""
    return identify([log(step_sums.resonance(3.0, 0.3), profile=FIT)], structures=[RESONANCE])


def best(run, fit):
    """The first cause and the words."""
    found = explain(run, fit)
    return found.causes[0], cause_text(found, fit, VOLT, 0.1)


def test_a_run_as_foretold_has_nothing_to_explain(lag):
    """Only noise is left."""
    found = explain(log(step_sums.lag(1.0), seed=2), lag)
    assert found.causes == ()
    assert found.missed == pytest.approx(NOISE, rel=0.3)
    assert level_text(found, lag, VOLT, 1.0) == ""


def test_a_changed_gain(lag):
    """+20 %; the interval holds it."""
    cause, text = best(log(step_sums.lag(1.0), gain=2.4, seed=3), lag)
    assert cause.name == "gain"
    assert cause.size == pytest.approx(0.2, abs=0.02)
    assert abs(cause.size - 0.2) < 2.0 * cause.error
    assert cause.explains > 0.95
    assert "gain changed by +" in text


def test_a_gain_of_the_other_sign(lag):
    """A swapped cable."""
    assert "gain of the other sign" in best(log(step_sums.lag(1.0), gain=-2.0, seed=4), lag)[1]


def test_a_slower_lag(lag):
    """1 s becomes 1.4 s."""
    cause, text = best(log(step_sums.lag(1.4), seed=5), lag)
    assert cause.name == "time constants"
    assert cause.size == pytest.approx(0.4, abs=0.05)
    assert "time constants changed by +" in text


@pytest.mark.parametrize("samples", [1, 3])
def test_a_delay_is_told_in_samples_of_the_log(lag, samples):
    """0.1 s a sample."""
    cause, text = best(log(step_sums.lag(1.0), dead_time=0.3 + 0.1 * samples, seed=6), lag)
    assert cause.name == "delay"
    assert cause.size == pytest.approx(0.1 * samples, abs=0.02)
    assert f"{samples} sample" in text


def test_a_shifted_frequency(swinging):
    """-6 %."""
    cause, text = best(log(step_sums.resonance(2.82, 0.3), seed=7), swinging)
    assert cause.name == "natural frequency"
    assert cause.size == pytest.approx(-0.06, abs=0.015)
    assert "natural frequency changed by -" in text


def test_a_lower_damping(swinging):
    """0.3 becomes 0.2: a third less."""
    cause, text = best(log(step_sums.resonance(3.0, 0.2), seed=8), swinging)
    assert cause.name == "damping ratio"
    assert cause.size == pytest.approx(-1.0 / 3.0, abs=0.05)
    assert "damping ratio changed by -" in text


def test_a_saturated_command(lag):
    """The actuator ends at 0.3 V where 0.6 V are logged."""
    cause, text = best(log(step_sums.lag(1.0), seed=9, seen=lambda command: np.minimum(command, 0.3)), lag)
    assert cause.name == "command ends"
    assert cause.size == pytest.approx(0.3, abs=0.02)
    assert "ends at 0.3" in text
    assert " V (saturation)" in text


def test_play_in_the_actuator(lag):
    """0.3 V of play, by the definition: half of it each way is lost at every turn."""

    def behind(command):
        out, at = np.empty(len(command)), 0.0
        for i, value in enumerate(command):
            at = min(max(at, value - 0.15), value + 0.15)
            out[i] = at
        return out

    cause, text = best(log(step_sums.lag(1.0), seed=10, seen=behind), lag)
    assert cause.name == "play"
    assert cause.size == pytest.approx(0.3, abs=0.03)
    assert "play or sticking of 0." in text


def test_a_drift(lag):
    """The response creeps up by 0.8 mm over the run."""
    cause, text = best(log(step_sums.lag(1.0), seed=11, drift=0.8), lag)
    assert cause.name == "drift"
    assert cause.size == pytest.approx(0.8, abs=0.05)
    assert "drift of +0." in text


def test_another_operating_point(lag):
    """The level 3 mm higher: as 1.5 V would do at a gain of 2 mm/V, and nothing else to explain."""
    found = explain(log(step_sums.lag(1.0), seed=12, level=8.0), lag)
    assert found.causes == ()
    assert found.level == pytest.approx(3.0, abs=0.05)
    assert found.level_command == pytest.approx(1.5, abs=0.05)
    assert "another operating point" in level_text(found, lag, VOLT, 1.5)


def test_another_load_on_an_integrating_plant():
    """A drift of 0.16 mm/s that was not there: as 0.2 V at a gain of 0.8 mm/s per V."""
    step = step_sums.integrator()
    fit = identify([log(step, gain=0.8, profile=FIT)], structures=[INTEGRATOR])
    found = explain(log(step, gain=0.8, seed=13, drift=0.16 * TIME[-1]), fit)
    assert found.level_command == pytest.approx(0.2, abs=0.02)
    assert "another load" in level_text(found, fit, VOLT, 1.0)


def test_more_friction_in_a_drive():
    """A true rig's drive whose dry friction has doubled, of 8 % of the test's command."""

    def run(friction, seed, levels):
        rig = TrueRig(
            (Gain(1.0), FrictionDrive(0.4, friction), Integrator()), 0.05, 0.0, 20.0, Sensor(noise=0.01), 0.01
        )
        changes = [(1.0 + 2.0 * k, level) for k, level in enumerate(levels)]
        made = open_loop(rig, changes, 2.0 * len(levels) + 3.0, 0.02, np.random.default_rng(seed))
        return Run("drive", made.time, made.command, made.reading)

    fit = identify([run(0.08, 1, (1.0, -1.0, 0.0, 0.5, -0.5, 0.0))], structures=[DRIVE_WITH_FRICTION])
    found = explain(run(0.16, 2, (-0.8, 0.8, 0.0, -0.5, 0.5, 0.0)), fit)
    assert found.causes[0].name == "friction"
    assert found.causes[0].size == pytest.approx(1.0, abs=0.15)
    assert "friction changed by +" in cause_text(found, fit, VOLT, 0.02)


def test_a_cause_is_not_told_where_none_explains_the_miss(lag):
    """A pulse from outside that no command made."""
    run = log(step_sums.lag(1.0), seed=14)
    pulse = 1.0 * ((run.time > 5.0) & (run.time < 6.5)) - 1.0 * ((run.time > 12.0) & (run.time < 13.0))
    assert cause_text(explain(replace(run, response=run.response + pulse), lag), lag, VOLT, 0.1) == ""
