"""Gains to difference equation, and plants to pulse transfer functions, against closed forms and published figures."""

import numpy as np
import pytest
from gainwright.design.compensator import open_loop
from gainwright.design.discretise import columns_of, law_columns, law_from_gains
from gainwright.design.gains import Gains
from gainwright.design.requirements import ControllerSetting
from gainwright.design.sampled.bank import build_bank
from gainwright.design.sampled.frequency import margins_of, spectra_of
from gainwright.design.sampled.loop import Clamps, simulate
from gainwright.design.sampled.poles import starting_poles
from gainwright.design.sampled.pulse import law_response, pulse_of
from gainwright.ident.plant import Plant

ONE = np.zeros(1, dtype=int)
POINTS = np.array([[1.3 + 0.4j], [0.2 - 0.9j], [-1.0 + 0.0j]])


def pulse_at(plant, interval, delay=0.0):
    """H(z) at three points off the poles."""
    bank = build_bank([plant], interval, computation_delay=delay)
    return pulse_of(bank).at(POINTS, np.zeros(1, dtype=int))[:, 0]


def critical_gain(plant, interval, delay=0.0):
    """Least proportional gain at which a closed-loop pole leaves the unit circle."""
    spectra = spectra_of(build_bank([plant], interval, computation_delay=delay))
    law = law_columns(columns_of([Gains("P", 1e-6)]), interval)
    return 1e-6 * margins_of(spectra, ONE, law).upper[0]


def test_the_held_double_integrator_is_the_textbook_pulse_transfer_function():
    """SD-01, exact: 1/s^2 -> T^2/2 (z + 1)/(z - 1)^2 (Franklin, Powell and Workman, Digital Control)."""
    z = POINTS[:, 0]
    for interval in (1.0, 0.01):
        expected = interval**2 / 2 * (z + 1) / (z - 1) ** 2
        assert pulse_at(Plant((1.0,), (1.0, 0.0, 0.0)), interval) == pytest.approx(expected, rel=1e-11)


def test_the_held_servo_has_the_published_numerator_and_critical_gain():
    """SD-02: 1/(s(s+1)), T = 1: (0.3679 z + 0.2642)/((z-1)(z-0.3679)), critical K 2.39 (Ogata; gain from memory)."""
    plant, z = Plant((1.0,), (1.0, 1.0, 0.0)), POINTS[:, 0]
    found = pulse_at(plant, 1.0) * (z - 1) * (z - np.exp(-1.0))
    slope, level = np.polyfit(z, found, 1)
    assert slope.real == pytest.approx(0.3679, abs=5e-5)
    assert level.real == pytest.approx(0.2642, abs=5e-5)
    assert critical_gain(plant, 1.0) == pytest.approx(2.39, abs=5e-3)


@pytest.mark.parametrize(
    ("interval", "expected"), [(0.1, 20.3389), (0.2, 10.3446), (0.5, 4.3620), (1.0, 2.3922), (2.0, 1.4557)]
)
def test_the_critical_gain_falls_with_the_sample_time_as_the_jury_test_says(interval, expected):
    """SD-03, exact law min[(1-a)/b0, 2(1+a)/(b1-b0)] for 1/(s(s+1)); figures computed from it, half a last digit."""
    assert critical_gain(Plant((1.0,), (1.0, 1.0, 0.0)), interval) == pytest.approx(expected, abs=5.1e-5)


def test_the_slow_antenna_example_has_its_published_zero_and_pole():
    """SD-04: 1/(s(10s+1)), T = 1: 0.0484 (z + 0.967)/((z-1)(z-0.905)) (Franklin, Powell and Workman; memory)."""
    z = POINTS[:, 0]
    found = pulse_at(Plant((1.0,), (10.0, 1.0, 0.0)), 1.0) * (z - 1) * (z - np.exp(-0.1))
    slope, level = np.polyfit(z, found, 1)
    assert slope.real == pytest.approx(0.0484, abs=5e-5)
    assert (level / slope).real == pytest.approx(0.967, abs=5e-4)


def test_a_held_integrator_under_proportional_control_is_deadbeat_at_kt_one_and_unstable_at_two():
    """SD-05, exact: z = 1 - K T, stable for 0 < K T < 2."""
    plant, interval = Plant((3.0,), (1.0, 0.0)), 0.2
    assert critical_gain(plant, interval) * 3.0 * interval == pytest.approx(2.0, rel=1e-9)
    bank = build_bank([plant], interval, points=1)
    law = law_columns(columns_of([Gains("P", 1.0 / (3.0 * interval))]), interval)
    free = Clamps(np.array([-np.inf]), np.array([np.inf]))
    step = simulate(bank, ONE, law, setpoint=np.ones(1), disturbance=np.zeros(1), clamps=free, samples=4)
    assert step.response[:, 0] == pytest.approx(np.ones(4), abs=1e-12)


def test_one_more_sample_of_delay_halves_the_critical_gain_and_rings_six_samples_long():
    """SD-06, exact: z^2 - z + K T: stable for 0 < K T < 1, |z| = 1 at +-60 degrees, double pole 0.5 at K T = 0.25."""
    plant, interval = Plant((1.0,), (1.0, 0.0), 0.5), 0.5
    critical = critical_gain(plant, interval)
    assert critical * interval == pytest.approx(1.0, rel=1e-9)
    bank = build_bank([plant], interval)
    for gain, expected in ((critical, np.exp(1j * np.pi / 3)), (0.25 / interval, 0.5)):
        law = law_columns(columns_of([Gains("P", gain)]), interval)
        z = np.exp(starting_poles(bank, ONE, law)[:, 0] * interval)
        # a double eigenvalue is known to the square root of the rounding only
        assert np.abs(z - expected).min() < 1e-7


@pytest.mark.parametrize(
    ("ratio", "direct", "delayed"), [(0.1, 20.0167, 10.5083), (0.5, 4.0830, 2.5415), (1.0, 2.1640, 1.5820)]
)
def test_a_held_lag_has_the_exact_critical_gains(ratio, direct, delayed):
    """SD-07, exact: K < (1 + a)/(1 - a) = coth(T/(2 tau)); with one more sample K < 1/(1 - a)."""
    plant = Plant((1.0,), (1.0, 1.0))
    assert critical_gain(plant, ratio) == pytest.approx(direct, abs=5.1e-5)
    assert critical_gain(plant, ratio) == pytest.approx(1.0 / np.tanh(ratio / 2), rel=1e-9)
    assert critical_gain(plant, ratio, delay=ratio) == pytest.approx(delayed, abs=5.1e-5)


def test_the_hold_in_the_continuous_loop_lags_by_half_a_sample():
    """SD-08, exact: at a tenth of the sample rate gain 0.9836 and -18 degrees, at half of it 2/pi and -90 degrees."""
    loop = open_loop(Gains("P", 1.0), Plant((1.0,), (1.0,)), ControllerSetting(0.01))
    tenth, half = (complex(loop.at(1j * 2 * np.pi * share / 0.01)) for share in (0.1, 0.5))
    assert abs(tenth) == pytest.approx(0.983632, abs=5e-7)
    assert np.degrees(np.angle(tenth)) == pytest.approx(-18.0, abs=1e-9)
    assert abs(half) == pytest.approx(2 / np.pi, rel=1e-12)
    assert np.degrees(np.angle(half)) == pytest.approx(-90.0, abs=1e-9)


def test_a_lag_network_is_mapped_by_the_bilinear_rule():
    """SD-09, exact: 1/(s+1) at T = 1 -> (z+1)/(3z-1); here (s+3)/(s+1) = 1 + 2/(s+1)."""
    law = law_columns(columns_of([Gains("lag", 1.0, zero=3.0, pole=1.0)]), 1.0)
    z = POINTS
    expected = 1 + 2 * (z + 1) / (3 * z - 1)
    assert law_response(law, z)[:, 0] == pytest.approx(expected[:, 0], rel=1e-13)


def test_the_integral_is_a_trapezoid_and_the_derivative_ramp_invariant():
    """Exact: the law's answer to a ramp of the response is P t + D (1 - exp(-t/Tf)) + I t^2/2 at the samples.

    The trapezoid integrates a straight line without error, and a ramp-invariant filter is exact for a ramp.
    """
    gains, interval = Gains("PID", 2.0, 3.0, 0.5, 0.04), 0.01
    law = law_from_gains(gains, interval)
    ramp = np.arange(60) * interval
    command = np.zeros(60)
    for k in range(60):
        command[k] = -sum(c * ramp[k - i] for i, c in enumerate(law.response) if k >= i)
        command[k] -= sum(c * command[k - i] for i, c in enumerate(law.command) if 0 < i <= k)
    expected = -(2.0 * ramp + 3.0 * ramp**2 / 2 + 0.5 * (1 - np.exp(-ramp / 0.04)))
    assert command == pytest.approx(expected, abs=1e-12)


@pytest.mark.parametrize("interval", [1e-4, 0.003, 0.1, 7.0])
@pytest.mark.parametrize("structure", ["I", "PI", "PID"])
def test_the_command_coefficients_sum_to_zero_exactly_with_integral_action(structure, interval):
    """To the last bit, whatever the numbers: else the response would not come to rest on the setpoint."""
    rng = np.random.default_rng(3)
    for _ in range(20):
        p, i, d, lag = rng.uniform(0.01, 9.0, 4)
        gains = Gains(structure, p * (structure != "I"), i, d * (structure == "PID"), lag * (structure == "PID"))
        assert sum(law_from_gains(gains, interval).command) == 0.0


def test_the_memory_drops_out_without_a_clamp():
    """v = u leaves A(q) u = R r - S y, so another memory may change nothing in an unlimited run."""
    bank = build_bank([Plant((2.0,), (0.5, 1.0), 0.03)], 0.02)
    law = law_columns(columns_of([Gains("PID", 0.5, 1.0, 0.02, 0.01)]), 0.02)
    other = type(law)(law.command, law.setpoint, law.response, np.array([[1.0], [0.3], [0.1]]))
    free = Clamps(np.array([-np.inf]), np.array([np.inf]))
    runs = [
        simulate(bank, ONE, one, setpoint=np.ones(1), disturbance=np.zeros(1), clamps=free, samples=80).response
        for one in (law, other)
    ]
    assert runs[0] == pytest.approx(runs[1], abs=1e-12)


@pytest.mark.parametrize("gains", [Gains("PI", 1.0, 0.4), Gains("I", 0.0, 2.0), Gains("PID", 2.0, 0.5, 1.5, 0.1)])
def test_the_memory_is_stable(gains):
    """Zeros of the memory polynomial lie inside the unit circle: a clamped law forgets."""
    law = law_from_gains(gains, 0.05)
    assert np.all(np.abs(np.roots(law.memory)) < 1.0)


def test_a_clamped_integral_follows_with_the_integral_time():
    """PI: the memory's one pole is exp(-T/Ti), Ti = P/I; I alone forgets at once."""
    assert law_from_gains(Gains("PI", 2.0, 4.0), 0.05).memory == pytest.approx((1.0, -np.exp(-0.05 / 0.5)), rel=1e-14)
    assert law_from_gains(Gains("I", integral=4.0), 0.05).memory == pytest.approx((1.0, 0.0), abs=0)
