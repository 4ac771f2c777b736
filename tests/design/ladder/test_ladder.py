"""The gain ladder against closed forms: damping, Routh's condition, delayed integrators, first-order steps."""

from itertools import pairwise

import numpy as np
import pytest
from gainwright.design.gains import Gains
from gainwright.design.ladder.build import FIRST_STEP, build_ladder
from gainwright.design.ladder.rung import LARGEST_STEP
from gainwright.design.requirements import ControllerSetting, Limits, Requirement, Requirements
from gainwright.ident.fitted import Noise, Plausible
from gainwright.ident.plant import Plant

T = 0.002
STEP = 20.0
WIDE = Limits(-1e6, 1e6, None, -1e6, 1e6, None)


def plausible(plants, stiction=0.0):
    """Plants of equal weight about command 0."""
    count = len(plants)
    return Plausible(tuple(plants), np.zeros(count), np.full(count, stiction))


def ladder_for(gains, plants, *, interval=T, noise=0.01, limits=WIDE, step=STEP, old=None, stiction=0.0):
    """A ladder of the first plant and its siblings."""
    return build_ladder(
        gains,
        plants[0],
        plausible(plants, stiction),
        operating_command=0.0,
        operating_response=100.0,
        noise=Noise(interval, noise, noise),
        requirements=Requirements((Requirement("settling_time", 4.0, "at_most", "s", band=0.02),), step),
        limits=limits,
        setting=ControllerSetting(interval),
        old=old,
    )


def damping(polynomial):
    """Least damping ratio of the roots that swing, 1 where none does."""
    roots = np.roots(polynomial)
    swinging = roots[np.abs(roots.imag) > 1e-9 * np.abs(roots)]
    return float(np.min(-swinging.real / np.abs(swinging), initial=1.0))


def test_a_pi_on_an_integrator_keeps_its_damping_where_fixed_zeros_lose_it():
    """s^2 + k P s + k I: damping ratio (P/2) sqrt(k/I), exact. From 1.1 it would fall to 0.35 at a tenth of the gain
    with fixed zeros (1.1 sqrt(0.1)); every rung keeps at least 0.95 of a damping of one.
    """
    target = Gains("PI", 2.0, (2.0 / 2.2) ** 2)
    assert damping([1.0, target.proportional, target.integral]) == 1.0
    assert damping([1.0, 0.1 * target.proportional, 0.1 * target.integral]) == pytest.approx(0.35, abs=0.003)
    ladder = ladder_for(target, [Plant((k,), (1.0, 0.0), 0.0) for k in (1.0, 0.98, 1.02, 1.01)])
    assert len(ladder.rungs) == 5
    for rung in ladder.rungs:
        assert damping([1.0, rung.gains.proportional, rung.gains.integral]) >= 0.93


def test_a_pid_on_a_double_integrator_stays_stable_where_a_fifth_of_its_gains_is_not():
    """s^3 + D s^2 + P s + I is stable where D P > I (Routh's condition, exact law); (s + 1)(s^2 + 2 s + 2) has P = 4,
    I = 2, D = 3. A fifth of all three: 0.6 * 0.8 < 0.4 is just stable, an eighth is not.
    """
    target = Gains("PID", 4.0, 2.0, 3.0, 0.001)
    assert 4.0 * 3.0 / 8.0**2 < 2.0 / 8.0
    ladder = ladder_for(target, [Plant((k,), (1.0, 0.0, 0.0), 0.0) for k in (1.0, 0.97, 1.03)])
    assert ladder.refusal == ""
    wanted = 0.9 * damping([1.0, 3.0, 4.0, 2.0])
    for rung in ladder.rungs:
        gains = rung.gains
        assert gains.derivative * gains.proportional > 2.0 * gains.integral
        assert damping([1.0, gains.derivative, gains.proportional, gains.integral]) > wanted


def test_steps_in_gain_are_small_and_the_last_rung_is_the_target():
    """At most a factor 1.5 from rung to rung, proportional and derivative; setpoint steps grow to the whole."""
    target = Gains("PID", 4.0, 2.0, 3.0, 0.001)
    rungs = ladder_for(target, [Plant((1.0,), (1.0, 0.0, 0.0), 0.0)] * 3).rungs
    for lower, upper in pairwise(rungs):
        assert 1.0 < upper.gains.proportional / lower.gains.proportional <= LARGEST_STEP
        assert 1.0 <= upper.gains.derivative / lower.gains.derivative <= LARGEST_STEP
    sizes = [rung.expected.setpoint_to - rung.expected.setpoint_from for rung in rungs]
    assert sizes[0] <= FIRST_STEP * STEP + 1e-12
    assert sizes == sorted(sizes)
    assert (rungs[-1].gains, sizes[-1]) == (target, STEP)


def test_the_lowest_margin_is_that_of_the_worst_plant():
    """P on k/s behind a dead time of one sample: L = x/(z (z - 1)), x = k P T, so its gain margin is 1/x exactly (the
    loop passes -1 at z = exp(i pi/3)).
    """
    slopes = np.linspace(0.8, 1.25, 40)
    ladder = ladder_for(Gains("P", 0.3 / 0.1), [Plant((k,), (1.0, 0.0), 0.1) for k in slopes], interval=0.1)
    assert len(ladder.rungs) == 5
    for rung in ladder.rungs:
        worst = 1.25 * rung.gains.proportional * 0.1
        assert rung.gain_margin == pytest.approx(-20 * np.log10(worst), abs=1e-6)
        assert rung.plants_checked == 40


def test_a_plant_that_runs_away_gets_no_ladder_and_the_sheet_says_so_aloud():
    """1/(s - 1): without the loop it leaves; one such plant among the plausible ones is enough."""
    ladder = ladder_for(Gains("P", 5.0), [Plant((1.0,), (1.0, 1.0), 0.0), Plant((1.0,), (1.0, -1.0), 0.0)])
    assert ladder.rungs == ()
    assert "RUNS AWAY WITH THE LOOP OPEN" in ladder.refusal


def test_a_conditionally_stable_loop_gets_no_ladder():
    """K (s + 1)^2/s^3: s^3 + K s^2 + 2 K s + K is stable where 2 K > 1 (Routh): K = 5 is, less gain is not safer."""
    ladder = ladder_for(Gains("P", 5.0), [Plant((1.0, 2.0, 1.0), (1.0, 0.0, 0.0, 0.0), 0.0)] * 2, interval=0.01)
    assert ladder.rungs == ()
    assert "CONDITIONALLY STABLE" in ladder.refusal


def test_turning_down_the_proportional_gain_alone_is_warned_of_where_it_is_unstable():
    """s^3 + D s^2 + 0.1 P s + I: 0.1 * 4 * 3 < 2 is unstable; on a plain integrator it never is."""
    double = ladder_for(Gains("PID", 4.0, 2.0, 3.0, 0.001), [Plant((1.0,), (1.0, 0.0, 0.0), 0.0)] * 2)
    single = ladder_for(Gains("PI", 2.0, 0.5), [Plant((1.0,), (1.0, 0.0), 0.0)] * 2)
    assert any("PROPORTIONAL GAIN ALONE" in caution for caution in double.cautions)
    assert single.cautions == ()


def test_the_expected_step_is_that_of_the_closed_form():
    """P on k/s sampled finely is the lag exp(-k P t): rise time ln 9/(k P), into 2 % after ln 50/(k P), no overshoot.

    Tolerance: half a sample of hold, and the longer interval that a slow rung is run at.
    """
    for rung in ladder_for(Gains("P", 3.0), [Plant((1.0,), (1.0, 0.0), 0.0)] * 5).rungs:
        pace, expected = rung.gains.proportional, rung.expected
        assert expected.rise_time.predicted == pytest.approx(np.log(9.0) / pace, rel=0.01)
        assert expected.settling_time.predicted == pytest.approx(np.log(50.0) / pace, rel=0.01)
        assert expected.overshoot.predicted < 1e-3
        assert expected.final.predicted == pytest.approx(expected.setpoint_to)
        time = expected.band.time
        course = expected.setpoint_to + (100.0 - expected.setpoint_to) * np.exp(-pace * time)
        assert np.abs(expected.band.response - course).max() < 0.02 * abs(expected.setpoint_to - 100.0)


def test_the_band_holds_what_an_independent_simulation_measures(run_small_steps):
    """Plants drawn afresh, run by Runge-Kutta, with noise: at most 0.5 % of the samples outside the 99.9 % band."""
    rng = np.random.default_rng(8)

    def drawn(count):
        return [
            Plant((k,), (tau, 1.0), lag)
            for k, tau, lag in zip(
                rng.normal(2.0, 0.06, count), rng.normal(0.5, 0.02, count), rng.normal(0.1, 0.004, count), strict=True
            )
        ]

    ladder = ladder_for(Gains("PI", 0.8, 1.4), [Plant((2.0,), (0.5, 1.0), 0.1), *drawn(200)], interval=0.02, noise=0.05)
    for rung in (ladder.rungs[0], ladder.rungs[-1]):
        band = rung.expected.band
        samples = int(band.time[-1] / 0.02)
        size = rung.expected.setpoint_to - 100.0
        times, responses, _ = run_small_steps(drawn(40), rung.law, setpoint=size, samples=samples)
        seen = 100.0 + responses[7::8] + rng.normal(0.0, 0.05, (samples, 40))
        low, high = np.interp(times[7::8], band.time, band.low), np.interp(times[7::8], band.time, band.high)
        assert np.mean((seen < low) | (seen > high)) < 0.005


def test_the_first_move_is_that_of_a_lag():
    """k x (1 - exp(-(t - L)/tau)) at the time given is a quarter of the test step; x stays in a quarter of the room."""
    ladder = ladder_for(Gains("P", 0.5), [Plant((2.0,), (0.5, 1.0), 0.1)] * 3)
    move = ladder.first_move
    reached = 2.0 * move.command_to * (1.0 - np.exp(-(move.within - 0.1) / 0.5))
    assert reached == pytest.approx(FIRST_STEP * STEP, rel=1e-6)
    assert move.moves.predicted == pytest.approx(reached, rel=1e-6)
    assert move.up
    narrow = Limits(-4.0, 4.0, None, -1e6, 1e6, None)
    assert ladder_for(Gains("P", 0.5), [Plant((2.0,), (0.5, 1.0), 0.1)] * 3, limits=narrow).first_move.command_to == 1.0


def test_the_first_move_of_a_reversed_plant_goes_the_other_way():
    """A negative gain and a step down: the command rises, and the response must fall."""
    move = ladder_for(Gains("P", -0.5), [Plant((-2.0,), (0.5, 1.0), 0.1)] * 3, step=-STEP).first_move
    assert (move.command_to > 0.0, move.up, move.moves.predicted < 0.0) == (True, False, True)


def test_the_first_move_overcomes_friction():
    """A drive K/(s (T s + 1)) with friction c moves by K (x - c) (t - T (1 - exp(-t/T))), exact law."""
    move = ladder_for(Gains("P", 0.1), [Plant((45.0,), (0.1, 1.0, 0.0), 0.0)] * 3, stiction=0.05).first_move
    t, x = move.within, move.command_to
    assert move.moves.predicted == pytest.approx(45.0 * (x - 0.05) * (t - 0.1 * (1.0 - np.exp(-t / 0.1))), rel=1e-6)
    assert move.moves.predicted == pytest.approx(FIRST_STEP * STEP, rel=0.01)


def test_a_move_lost_in_noise_is_said():
    """The command's room allows a move of a hundredth of the noise."""
    tight = Limits(-1e-3, 1e-3, None, -1e6, 1e6, None)
    ladder = ladder_for(Gains("P", 0.5), [Plant((2.0,), (0.5, 1.0), 0.1)] * 3, limits=tight, noise=0.05)
    assert any("lost in the noise" in caution for caution in ladder.cautions)


def test_a_ladder_from_old_gains_begins_with_them():
    """Even ratios of at most 1.5 in every gain; each rung between is the geometric middle."""
    old, new = Gains("PI", 0.4, 0.5), Gains("PI", 0.8, 1.4)
    plants = [Plant((2.0,), (0.5, 1.0), 0.1)] * 3
    ladder = ladder_for(new, plants, old=old)
    assert ladder.started_from == "old gains"
    assert (ladder.rungs[0].gains, ladder.rungs[-1].gains) == (old, new)
    for lower, upper in pairwise(ladder.rungs):
        assert upper.gains.integral / lower.gains.integral <= LARGEST_STEP + 1e-3
        assert upper.gains.proportional / lower.gains.proportional <= LARGEST_STEP


def test_old_gains_that_do_not_hold_are_no_rung():
    """P = 5 on 2/(0.5 s + 1) exp(-0.1 s): k P = 10 is beyond the critical 8.5 (0.1 w + atan(0.5 w) = pi)."""
    ladder = ladder_for(Gains("P", 0.5), [Plant((2.0,), (0.5, 1.0), 0.1)] * 3, old=Gains("P", 5.0))
    assert ladder.started_from == "nothing"
    assert ladder.rungs[0].gains.proportional < 0.5


def test_stronger_old_gains_are_no_start():
    """A ladder is climbed: it never begins above its target."""
    ladder = ladder_for(Gains("P", 0.5), [Plant((2.0,), (0.5, 1.0), 0.1)] * 3, old=Gains("P", 0.6))
    assert ladder.started_from == "nothing"
    assert ladder.rungs[0].gains.proportional < 0.5


def test_without_a_test_step_there_are_margins_and_no_expectation():
    """Nothing says how far to step; the rungs still stand."""
    ladder = ladder_for(Gains("P", 0.5), [Plant((2.0,), (0.5, 1.0), 0.1)] * 3, step=None)
    assert len(ladder.rungs) == 5
    assert all(rung.expected is None for rung in ladder.rungs)
