"""Values that follow from closed forms: what remains at rest, friction, start of the step, disturbances, both ways."""

import numpy as np
import pytest
from gainwright.design.gains import Gains
from gainwright.design.judge import judge_plants
from gainwright.design.requirements import ControllerSetting, Limits, Requirement, Requirements
from gainwright.ident.fitted import Noise, Plausible
from gainwright.ident.plant import Plant

SETTING = ControllerSetting(0.02)
STATIC = Plant((2.0,), (0.5, 1.0), 0.05)
SERVO = Plant((3.0,), (0.1, 1.0, 0.0), 0.05)


def judged(gains, plants, items, *, step=1.0, commands=None, stiction=0.0, limits=None, noise=None, **more):
    """Judge on a handful of plants at operating point (3 V, 10 mm)."""
    count = len(plants)
    plausible = Plausible(
        tuple(plants), np.full(count, 3.0) if commands is None else np.asarray(commands), np.full(count, stiction)
    )
    return judge_plants(
        gains,
        plausible,
        operating_command=3.0,
        operating_response=10.0,
        noise=noise,
        requirements=Requirements(tuple(items), step, **more),
        limits=limits or Limits(),
        setting=SETTING,
    )


ERROR = Requirement("steady_state_error", 1.0, "at_most", "mm")


def test_p_around_a_static_plant_leaves_one_over_one_plus_pk():
    """1/(1 + 2 * 0.8) of the step; a wrong operating command of 0.1 V adds 2 * 0.1/(1 + 1.6)."""
    value = judged(Gains("P", 0.8), [STATIC, STATIC], [ERROR], commands=[3.0, 2.9]).values["steady_state_error"]
    assert value[0] == pytest.approx(1 / 2.6, abs=1e-9)
    assert value[1] == pytest.approx(abs(1 - (1.6 + 0.2) / 2.6), abs=1e-9)


def test_p_around_a_servo_leaves_the_operating_command_error_over_p():
    """Nothing for a right operating command; 0.1 V/P for one that is 0.1 V off; friction adds stiction/P."""
    plants = [SERVO, SERVO]
    value = judged(Gains("P", 0.8), plants, [ERROR], commands=[3.0, 2.9], stiction=0.04).values["steady_state_error"]
    assert value[0] == pytest.approx(0.04 / 0.8, abs=1e-9)
    assert value[1] == pytest.approx(0.1 / 0.8 + 0.04 / 0.8, abs=1e-9)


def test_integral_action_leaves_nothing():
    """Whatever the operating command and the friction."""
    value = judged(Gains("PI", 0.4, 0.8), [STATIC], [ERROR], commands=[2.7], stiction=0.1).values["steady_state_error"]
    assert value[0] == pytest.approx(0.0, abs=1e-9)


def test_the_stretch_before_the_step_is_the_steady_state_at_its_start():
    """From 12 mm a static plant of gain 2 starts at 3 + 2/2 = 4 V, and ends at 4.5 V after a step of 1 mm."""
    verdicts = judged(Gains("I", integral=0.5), [STATIC], [ERROR], step_start=12.0, limits=Limits(0, 9, None, 0, 20))
    assert verdicts.extremes["command lowest"][0] == pytest.approx(4.0, abs=1e-9)
    assert verdicts.extremes["command highest"][0] >= 4.5 - 1e-9
    assert verdicts.extremes["response lowest"][0] == pytest.approx(12.0, abs=1e-9)


def test_both_directions_mirror_each_other_around_the_start():
    """Without a clamp the extremes lie as far below the start as above it."""
    verdicts = judged(
        Gains("PI", 0.6, 2.5), [STATIC], [ERROR], limits=Limits(None, None, None, 0.0, 20.0), both_directions=True
    )
    high, low = verdicts.extremes["response highest"][0], verdicts.extremes["response lowest"][0]
    assert high > 11.0
    assert high - 10.0 == pytest.approx(10.0 - low, abs=1e-9)


def test_a_step_towards_a_near_clamp_is_judged_in_both_directions():
    """1 V of room upwards and none to spare downwards: the downward step never arrives, and settling is never."""
    item = Requirement("settling_time", 5.0, "at_most", "s", band=0.02)
    one_way = judged(Gains("PI", 0.3, 0.8), [STATIC], [item], limits=Limits(2.8, 9.0, None, 0.0, 20.0))
    two_ways = judged(
        Gains("PI", 0.3, 0.8), [STATIC], [item], limits=Limits(2.8, 9.0, None, 0.0, 20.0), both_directions=True
    )
    assert np.isfinite(one_way.values["settling_time"][0])
    assert np.isinf(two_ways.values["settling_time"][0])
    assert not two_ways.meets_all[0]


def test_a_command_disturbance_peaks_at_the_open_loop_response_when_the_loop_is_slow():
    """With hardly any gain the response to 0.5 V ends at g * 0.5 = 1 mm, and it never recovers."""
    peak = Requirement("disturbance_peak", 2.0, "at_most", "mm", command_step=0.5)
    back = Requirement("disturbance_recovery", 3.0, "at_most", "s", command_step=0.5, band=0.1)
    values = judged(Gains("P", 1e-6), [STATIC], [peak, back]).values
    assert values["disturbance_peak"][0] == pytest.approx(1.0, rel=1e-4)
    assert np.isinf(values["disturbance_recovery"][0])


def test_an_integral_brings_a_disturbance_back_into_its_band():
    """The area under the deviation is disturbance/I; it returns and stays within 0.1 mm."""
    back = Requirement("disturbance_recovery", 3.0, "at_most", "s", command_step=0.5, band=0.1)
    verdicts = judged(Gains("PI", 0.5, 1.2), [STATIC], [back])
    assert 0.2 < verdicts.values["disturbance_recovery"][0] < 3.0
    assert verdicts.meets_all[0]


def test_noise_is_only_judged_where_it_is_known():
    """P around a slow plant passes white noise of 0.01 mm times P; without a noise model the item can't be met."""
    item = Requirement("command_noise", 0.1, "at_most", "V")
    slow = Plant((1.0,), (500.0, 1.0), 0.05)
    known = judged(Gains("P", 0.8), [slow], [item], noise=Noise(0.02, 0.01, 0.01))
    assert known.values["command_noise"][0] == pytest.approx(0.008, rel=5e-3)
    assert not judged(Gains("P", 0.8), [slow], [item]).meets_all[0]


def test_an_unstable_plant_meets_nothing():
    """Ten times the critical gain on one of two plants: it fails, the other is judged as if alone."""
    item = Requirement("overshoot", 0.5, "at_most", "%")
    fast = Plant((40.0,), (0.5, 1.0), 0.05)
    verdicts = judged(Gains("PI", 0.5, 1.0), [STATIC, fast], [item])
    assert verdicts.stable.tolist() == [True, False]
    assert verdicts.meets_all.tolist() == [True, False]
    assert verdicts.limits_kept.tolist() == [True, False]


@pytest.mark.parametrize("plant", [STATIC, SERVO])
def test_each_plant_starts_from_the_command_that_holds_it(plant):
    """Held by 2.9 V and not by the 3 V of the law's origin: with an integral the step starts from 2.9 V."""
    gains = Gains("PI", 0.2, 0.1)
    bounds = Limits(0.0, 9.0, None, 0.0, 20.0)
    verdicts = judged(gains, [plant], [ERROR], commands=[2.9], limits=bounds, step=1e-6)
    assert verdicts.extremes["command lowest"][0] == pytest.approx(2.9, abs=1e-5)
    assert verdicts.extremes["command highest"][0] == pytest.approx(2.9, abs=1e-5)
