"""Held-out records against fit and gains: every verdict, each for its own reason."""

import re
from dataclasses import replace

import numpy as np
import pytest
import step_sums
from gainwright.design.closing.prediction import predict
from gainwright.design.closing.verdict import compare
from gainwright.design.design import design_gains
from gainwright.design.requirements import ControllerSetting, Limits, Requirement, Requirements
from gainwright.ident.catalogue import INTEGRATOR, LAG, TWO_LAGS_WITH_ZERO
from gainwright.ident.confront import confront
from gainwright.ident.identify import identify
from gainwright.ident.run import Run

TIME = 0.1 * np.arange(200)
FIT = ((2.0, 1.0), (8.0, -1.0), (14.0, 0.5))
FRESH = ((3.0, -1.0), (11.0, 0.5))
NOISE = 0.03


def log(gain, dead_time, seed, *, profile=FRESH, level=5.0, noise=NOISE, step=None, drift=0.0):
    """A record of a lag of 1 s from command 0, with first-order noise of rho = 0.7."""
    rng = np.random.default_rng(seed)
    command = step_sums.steps(TIME, profile, 0.0)
    clean = step_sums.response(step or step_sums.lag(1.0), gain, dead_time, TIME, command, 0.0)
    return Run("fresh", TIME, command, level + drift * TIME + clean + step_sums.coloured(rng, len(TIME), noise, 0.7))


ASKED = {
    "requirements": Requirements(
        (Requirement("overshoot", 0.2, "at_most"), Requirement("settling_time", 6.0, "at_most", band=0.05)),
        test_step=1.0,
    ),
    "limits": Limits(-5.0, 5.0, None, float("-inf"), float("inf"), float("inf")),
    "setting": ControllerSetting(0.1, 0.0, ("PI",)),
}


@pytest.fixture(scope="module")
def job():
    """Fit of a lag (gain 2, 1 s, dead time 0.3 s) and PI gains designed for it."""
    fit = identify([log(2.0, 0.3, 1, profile=FIT)], structures=[LAG])
    design = design_gains(
        fit.plant,
        fit.plausible,
        operating_command=fit.operating_command,
        operating_response=fit.operating_response,
        noise=fit.noise,
        command_unit="V",
        response_unit="mm",
        **ASKED,
    )
    assert design.share_meeting >= 0.95, design.reasons
    return fit, design


def verdict(job, run):
    """Of one run."""
    return compare(run, *job, **ASKED)


@pytest.mark.parametrize("seed", range(10, 16))
def test_an_unchanged_plant_agrees(job, seed):
    """Six fresh records: a false alarm at the 0.5 % level among them has a chance of 3 %, and these seeds have none."""
    found = verdict(job, log(2.0, 0.3, seed))
    assert found.verdict == "agrees", found.why
    assert 0.5 < found.share_meeting <= 1  # of the plants that this one record leaves open, more than the fit's
    # free run, operating point not refitted: the misfit is the noise and the uncertainty of the level
    assert found.misfit == pytest.approx(found.noise_floor, rel=0.5)
    assert found.coverage_95 > 0.8


@pytest.mark.parametrize(
    ("gain", "dead_time"), [(4.0, 0.3), (1.0, 0.3), (-2.0, 0.3), (2.0, 0.9)],
    ids=["gain doubled", "gain halved", "gain of the other sign", "dead time tripled"],
)  # fmt: skip
def test_another_plant_disagrees(job, gain, dead_time):
    """Each of these is a different machine for the loop, and the reason names what changed."""
    found = verdict(job, log(gain, dead_time, 20))
    assert found.verdict == "disagrees", found.why
    assert ("dead time" if dead_time > 0.3 else "gain") in found.why


def test_a_dead_rig_never_agrees(job):
    """Only noise where the response should have moved by 50 times the noise."""
    found = verdict(job, log(0.0, 0.3, 21))
    assert found.verdict != "agrees", found.why
    assert found.misfit > 2


def test_a_level_that_moved_does_not_make_it_disagree(job):
    """The misfit shows the shift, operating point not refitted; the plant is the same."""
    found = verdict(job, log(2.0, 0.3, 22, level=8.0))
    assert found.verdict == "agrees", found.why
    assert found.misfit > 1


def test_a_run_without_a_step_is_not_comparable(job):
    """The reason says what to record instead."""
    still = verdict(job, log(2.0, 0.3, 23, profile=()))
    assert still.verdict == "not comparable"
    assert "never moves" in still.why


def test_a_run_that_moves_less_than_its_noise_is_not_comparable(job):
    """Steps of 0.03 move the response by 0.06, twice the noise."""
    tiny = verdict(job, log(2.0, 0.3, 24, profile=((3.0, 0.03), (11.0, 0.0))))
    assert tiny.verdict == "not comparable"
    assert "larger steps" in tiny.why


def test_a_run_that_no_plant_of_the_structure_explains_disagrees(job):
    """A resonance of 6 rad/s where a lag was fitted: the residual of the run's own best fit is no noise."""
    found = verdict(job, log(2.0, 0.3, 25, step=step_sums.resonance(6.0, 0.03)))
    assert found.verdict == "disagrees"


def test_lost_samples_do_not_spoil_the_comparison(job):
    """A tenth lost: numbers stay finite and the verdict is that of the whole record."""
    run = log(2.0, 0.3, 26)
    response = run.response.copy()
    response[60:80] = np.nan
    found = verdict(job, replace(run, response=response))
    assert found.verdict == "agrees", found.why
    assert np.isfinite([found.misfit, found.noise_floor, found.coverage_95]).all()


def test_the_prediction_is_the_free_run_from_the_fitted_operating_point(job):
    """Against the closed form with the true plant: within the parameters' uncertainty, and the band holds 95 %."""
    fit, _ = job
    inside = []
    for seed in range(30, 38):
        run = log(2.0, 0.3, seed)
        found = predict(run, fit)
        truth = 5.0 + step_sums.response(step_sums.lag(1.0), 2.0, 0.3, TIME, run.command, 0.0)
        assert np.max(np.abs(found.predicted - truth)) < 0.15  # 5 % of a movement of 3
        inside.append(np.mean((run.response >= found.low) & (run.response <= found.high)))
    # one fit's error is common to all eight; each record of 200 samples of rho 0.7 is worth 35
    assert np.mean(inside) == pytest.approx(0.95, abs=0.05)


def test_an_integrating_plant_is_predicted_from_where_the_record_starts():
    """Its level is nowhere fixed: a record that starts elsewhere is still predicted, with its drift."""
    step = step_sums.integrator()
    fit = identify([log(0.8, 0.3, 40, profile=FIT, step=step, drift=-0.16)], structures=[INTEGRATOR])
    # a drift of -0.16 is a holding command of 0.2 at a gain of 0.8
    assert fit.operating_command == pytest.approx(0.2, abs=0.03)
    run = log(0.8, 0.3, 41, step=step, level=50.0, drift=-0.16)
    truth = 50.0 - 0.16 * TIME + step_sums.response(step, 0.8, 0.3, TIME, run.command, 0.0)
    assert np.max(np.abs(predict(run, fit).predicted - truth)) < 0.03 * np.ptp(truth) + 2 * NOISE


def test_a_drift_is_no_other_plant(job):
    """The response creeps by 2 mm over the run: not comparable, and the why says what to wait for."""
    found = verdict(job, log(2.0, 0.3, 27, drift=0.1))
    assert found.verdict == "not comparable", found.why
    assert "drift of +" in found.why
    assert "stands still" in found.why


def test_a_run_too_small_is_told_the_run_to_take(job):
    """Amplitude inside the limits of 5 either way, how long, and rest before and after."""
    tiny = verdict(job, log(2.0, 0.3, 28, profile=((3.0, 0.05), (11.0, 0.0))))
    assert tiny.verdict == "not comparable"
    size = float(re.search(r"steps either way of ([\d.]+) from", tiny.why).group(1))
    assert 0.05 < size <= 5.0
    assert "at rest for" in tiny.why


@pytest.mark.parametrize("samples", [1, 2])
def test_a_delay_is_named_in_samples_of_the_log(job, samples):
    """0.1 s a sample: whatever the gains make of it, the engineer knows what to look for."""
    found = verdict(job, log(2.0, 0.3 + 0.1 * samples, 29, noise=0.01))
    assert found.verdict != "agrees"
    assert f"{samples} sample{'s' if samples > 1 else ''} of this log" in found.why


def test_another_load_breaks_a_law_without_integral():
    """P on an integrating level, its load moved by 0.2 V: an error of 0.2/P at rest, seen by nothing but the drift."""
    step = step_sums.integrator()
    fit = identify([log(0.8, 0.3, 50, profile=FIT, step=step)], structures=[INTEGRATOR])
    asked = {
        **ASKED,
        "requirements": Requirements((Requirement("steady_state_error", 0.05, "at_most"),), test_step=1.0),
        "setting": ControllerSetting(0.1, 0.0, ("P",)),
    }
    design = design_gains(
        fit.plant,
        fit.plausible,
        operating_command=fit.operating_command,
        operating_response=fit.operating_response,
        noise=fit.noise,
        command_unit="V",
        response_unit="mm",
        **asked,
    )
    assert design.share_meeting >= 0.95, design.reasons
    assert 0.2 / abs(design.gains.proportional) > 0.05
    same = compare(log(0.8, 0.3, 51, step=step), fit, design, **asked)
    assert same.verdict == "agrees", same.why
    moved = compare(log(0.8, 0.3, 52, step=step, drift=-0.16), fit, design, **asked)
    assert moved.verdict == "disagrees", moved.why
    assert "another load" in moved.why


def test_two_lags_with_a_zero_are_compared_with_their_zero():
    """Zero time 0.3 s becomes 1.2 s, lags and gain as before: certain, and not agreed to; unchanged, no change is seen.

    Truth: K (Tz s + 1)/((T1 s + 1)(T2 s + 1)) is the two lags and Tz times their slope, both closed forms.
    """

    def with_zero(zero):
        slow, fast = 2.0, 0.5

        def step(t):
            slope = (np.exp(-t / slow) - np.exp(-t / fast)) / (slow - fast)
            return step_sums.two_lags(slow, fast)(t) + zero * slope

        return step

    fit = identify([log(2.0, 0.3, 60, profile=FIT, step=with_zero(0.3), noise=0.01)], structures=[TWO_LAGS_WITH_ZERO])
    assert fit.draws.shape[1] == len(TWO_LAGS_WITH_ZERO.shapes) + 3
    same = confront(log(2.0, 0.3, 61, step=with_zero(0.3), noise=0.01), fit)
    other = confront(log(2.0, 0.3, 62, step=with_zero(1.2), noise=0.01), fit)
    assert same.p_value > 0.005
    assert other.p_value < 0.005


def test_agreement_says_what_the_run_would_have_shown(job):
    """The smallest changes that break something, one parameter at a time, with their sizes."""
    found = verdict(job, log(2.0, 0.3, 10))
    assert found.verdict == "agrees"
    assert re.search(r"would have shown \(95 %\)[^;]*(gain|dead time|time constant) [+-]", found.why), found.why


def test_a_run_that_could_not_show_what_breaks_the_gains_confirms_nothing(job):
    """Small steps in a run without a visible change: what would break something could have passed unseen."""
    found = verdict(job, log(2.0, 0.3, 13, profile=((3.0, -0.12), (11.0, 0.06))))
    assert found.verdict == "not comparable"
    assert "could not have shown (95 %)" in found.why, found.why
    assert "take a run with" in found.why
