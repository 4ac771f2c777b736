"""The whole design stage on small problems: what is shipped holds, elsewhere too, and what can't be is said."""

import dataclasses

import numpy as np
import pytest
from gainwright.design.design import design_gains
from gainwright.design.judge import judge_plants
from gainwright.design.requirements import ControllerSetting, Limits, Requirement, Requirements
from gainwright.ident.fitted import Noise, Plausible
from gainwright.ident.plant import Plant

STEP = 2.0
SETTLES = Requirement("settling_time", 1.2, "at_most", "s", band=0.02)
OVERSHOOT = Requirement("overshoot", 0.1, "at_most", "%", 100.0)
ROOM = Limits(0.0, 10.0, None, 0.0, 40.0, np.inf)


def lags(count, seed, spread=0.05, gain=2.0):
    """A lag with dead time whose three numbers scatter independently."""
    rng = np.random.default_rng(seed)
    scatter = np.exp(spread * rng.standard_normal((count, 3)))
    return tuple(Plant((gain * g,), (0.5 * t, 1.0), 0.1 * d) for g, t, d in scatter)


def plausible_lags(count=250, seed=1, gain=2.0):
    """The same as plausible plants; the operating command scatters by 0.02."""
    rng = np.random.default_rng(seed + 100)
    return Plausible(lags(count, seed, gain=gain), 3.0 + 0.02 * rng.standard_normal(count), np.zeros(count))


def case(**changes):
    """Keywords of a job that can be done."""
    base = {
        "operating_command": 3.0,
        "operating_response": 10.0,
        "noise": Noise(0.01, 0.01, 0.01),
        "requirements": Requirements((OVERSHOOT, SETTLES), STEP),
        "limits": ROOM,
        "setting": ControllerSetting(0.02, 0.002),
    }
    return base | changes


def designed(plant=None, plausible=None, **changes):
    """Run the design stage."""
    return design_gains(
        plant or Plant((2.0,), (0.5, 1.0), 0.1),
        plausible or plausible_lags(),
        command_unit="V",
        response_unit="mm",
        **case(**changes),
    )


@pytest.fixture(scope="module")
def done():
    """The doable job, designed once."""
    return designed()


def test_the_shipped_law_keeps_its_promise_on_plants_it_never_saw(done, run_small_steps):
    """60 fresh plants of the same spread under the printed law, by Runge-Kutta: at least 95 % meet both bounds."""
    assert done.reasons == ()
    fresh = lags(60, seed=77)
    times, response, _ = run_small_steps(
        fresh,
        done.law,
        setpoint=STEP,
        samples=300,
        computation_delay=0.002,
        low=done.law.clamp.lowest,
        high=done.law.clamp.highest,
    )
    share = response / STEP
    outside = np.abs(share - 1) > 0.02
    last = outside.shape[0] - 1 - outside[::-1].argmax(axis=0)
    settled = times[np.minimum(last + 1, times.size - 1)]
    good = (share.max(axis=0) <= 1.1) & (settled <= 1.2) & ~outside[-1]
    assert good.mean() >= 0.95


def test_the_gain_is_that_of_the_magnitude_condition_at_a_pole_of_the_loop(done):
    """G_L of the contract written out: angle of -G_L within 0.01 deg, K = 1/|G_L|, and K is the printed gain P."""
    assert done.gains.structure == "PI"
    s, gains = done.selection.pole, done.gains
    zero = gains.integral / gains.proportional
    hold = (1 - np.exp(-s * 0.02)) / (s * 0.02)
    loop = (s + zero) / s * 2.0 / (0.5 * s + 1) * np.exp(-s * (0.1 + 0.002)) * hold
    assert np.degrees(np.angle(-loop)) == pytest.approx(0.0, abs=0.01)
    assert 1 / abs(loop) == pytest.approx(done.selection.loop_gain, rel=1e-9)
    assert done.selection.loop_gain == pytest.approx(gains.proportional, rel=1e-9)
    assert done.selection.loop_gain_unit == "V/mm"
    # the sampled pole stands beside it: five samples in the dead time and 25 in the lag bring them within 2 %
    assert abs(done.selection.sampled_pole - s) < 0.02 * abs(s)


def test_the_intervals_end_where_a_requirement_ends(done):
    """Just inside each edge the fitted plant meets everything stated, just outside it does not."""
    low, high = done.selection.intervals[0]
    wide_low, wide_high = done.selection.intervals_plausible[0]
    assert low < wide_low < done.selection.loop_gain < wide_high < high
    alone = Plausible((Plant((2.0,), (0.5, 1.0), 0.1),), np.array([3.0]), np.zeros(1))
    for factor, good in ((low * 1.001, True), (low * 0.999, False), (high * 0.999, True), (high * 1.001, False)):
        scale = factor / done.selection.loop_gain
        gains = dataclasses.replace(
            done.gains, proportional=done.gains.proportional * scale, integral=done.gains.integral * scale
        )
        verdicts = judge_plants(gains, alone, **case())
        stated = [verdicts.met(item)[0] for item in verdicts.items[:2]]
        assert all(stated) is good


def test_what_is_printed_is_what_was_checked(done):
    """The gains have at most five digits, the law is made from them, and judging them again gives the same share."""
    for value in (done.gains.proportional, done.gains.integral):
        assert value == float(f"{value:.5g}")
    weighted = done.gains.setpoint_weight * done.gains.proportional
    assert done.law.setpoint[0] == pytest.approx(weighted + 0.01 * done.gains.integral, rel=1e-12)
    assert done.law.response[0] == pytest.approx(done.gains.proportional + 0.01 * done.gains.integral, rel=1e-12)
    verdicts = judge_plants(done.gains, plausible_lags(), **case())
    assert verdicts.share_meeting == pytest.approx(done.share_meeting, abs=1e-12)
    by_law = judge_plants(done.gains, plausible_lags(), law=done.law, **case())
    assert np.array_equal(by_law.meets_all, verdicts.meets_all)


def test_the_same_job_gives_the_same_gains(done):
    """Seeded: to the last digit."""
    assert designed().gains == done.gains


def test_floors_are_judged_where_no_margin_is_asked_and_not_where_one_is(done):
    """Gain margin 6 dB, phase margin 30 deg, sensitivity 2: floors in the first job, none when a margin is stated."""
    assert {j.requirement.name for j in done.judged if j.floor} == {"gain_margin", "phase_margin", "peak_sensitivity"}
    margin = Requirement("phase_margin", 50.0, "at_least", "deg")
    other = designed(requirements=Requirements((OVERSHOOT, SETTLES, margin), STEP))
    assert [j.requirement.name for j in other.judged] == ["overshoot", "settling_time", "phase_margin"]
    assert not any(j.floor for j in other.judged)


def test_a_plant_of_negative_gain_gets_negative_gains(done):
    """The mirror of the job: same sizes of requirement values, signs turned, K positive."""
    mirrored = designed(Plant((-2.0,), (0.5, 1.0), 0.1), plausible_lags(gain=-2.0))
    assert mirrored.reasons == ()
    assert mirrored.gains.proportional < 0 > mirrored.gains.integral
    assert mirrored.selection.loop_gain > 0
    assert mirrored.share_meeting >= 0.95


def test_settling_asked_faster_than_the_dead_time_is_refused_in_words():
    """0.09 s is asked, 0.1 s pass before anything moves: the reason names both."""
    fast = Requirement("settling_time", 0.09, "at_most", "s", band=0.02)
    design = designed(requirements=Requirements((fast,), STEP))
    assert any("0.09 s is asked, but the dead time alone is 0.102 s" in reason for reason in design.reasons)
    assert design.share_meeting == 0.0


def test_a_step_that_the_command_cannot_hold_is_refused_in_words():
    """2 mm need 1 V more than the 3 V of the operating point; the limit is 3.6 V."""
    design = designed(limits=Limits(0.0, 3.6, None, 0.0, 40.0, np.inf))
    assert any("needs 4 V to be held, the highest command is 3.6 V" in reason for reason in design.reasons)


def test_a_response_limit_holds_for_the_worst_plant_not_for_most():
    """A ceiling 1 % above the new setpoint: the search finds gains that hardly overshoot on any of 250 plants."""
    ceiling = 10.0 + STEP * 1.01
    design = designed(limits=Limits(0.0, 10.0, None, 0.0, ceiling, np.inf))
    worst = next(limit for limit in design.limits if limit.name == "response highest")
    assert worst.predicted_worst <= ceiling
    assert design.limits_kept


def test_a_clamped_command_is_allowed_and_said():
    """4.1 V against 4 V needed at rest: the kick is limited, everything may hold, share and duration are reported."""
    design = designed(limits=Limits(0.0, 4.35, None, 0.0, 40.0, np.inf))
    highest = next(limit for limit in design.limits if limit.name == "command highest")
    assert highest.met
    if design.clamped_share > 0:
        assert design.clamped_duration > 0
        assert any("limited during the test step" in caution for caution in design.cautions)


def test_missing_command_limits_are_said_in_capitals():
    """No clamp is made up."""
    design = designed(limits=Limits())
    assert design.law.clamp.lowest is None
    assert any("NO COMMAND LIMITS WERE GIVEN" in caution for caution in design.cautions)


def test_a_servo_gets_by_with_p_and_its_stable_set_starts_at_zero():
    """Integrating plant, a phase margin asked: P is simplest; every smaller K holds, so the interval opens at 0."""
    rng = np.random.default_rng(5)
    plants = tuple(Plant((3.0 * g,), (0.1, 1.0, 0.0), 0.05) for g in np.exp(0.05 * rng.standard_normal(300)))
    margin = Requirement("phase_margin", 50.0, "at_least", "deg")
    design = designed(
        Plant((3.0,), (0.1, 1.0, 0.0), 0.05),
        Plausible(plants, np.full(300, 3.0), np.zeros(300)),
        requirements=Requirements((margin,)),
        limits=Limits(),
    )
    assert design.gains.structure == "P"
    assert design.reasons == ()
    assert design.selection.intervals[0][0] == 0.0
    assert design.selection.intervals[0][1] > design.selection.loop_gain
    assert design.trajectory is None


def test_with_nothing_asked_the_interval_is_the_stable_set():
    """SD-06 in the large: integrator with one sample of delay under P, K T < 1 exactly, floors leave it alone."""
    plant = Plant((1.0,), (1.0, 0.0), 0.02)
    some = Plausible((plant,) * 30, np.full(30, 3.0), np.zeros(30))
    setting = ControllerSetting(0.02, 0.0, ("P",))
    design = designed(plant, some, requirements=Requirements(), setting=setting)
    assert design.selection.intervals == ((0.0, pytest.approx(1 / 0.02, rel=1e-5)),)


def test_lead_lag_is_refused_to_nobody_who_allows_it(done):
    """Allowed by name it is the one that is tried; `done`, which names nothing, never needed it."""
    alone = designed(setting=ControllerSetting(0.02, 0.002, ("lead-lag",)))
    assert [row.structure for row in alone.tried] == ["lead-lag"]
    assert "lead-lag" not in [row.structure for row in done.tried]


def test_the_trajectory_starts_at_rest_and_ends_at_the_setpoint_inside_its_band(done):
    """Absolute readings: 10 mm to 12 mm, the fitted plant within the band of the plausible ones."""
    path = done.trajectory
    assert path.response[0] == pytest.approx(10.0, abs=1e-9)
    assert path.response[-1] == pytest.approx(12.0, abs=0.02)
    assert np.all(path.response_low <= path.response_high)
    assert np.mean((path.response >= path.response_low - 1e-9) & (path.response <= path.response_high + 1e-9)) > 0.95
    assert path.command[-1] == pytest.approx(4.0, abs=0.05)
