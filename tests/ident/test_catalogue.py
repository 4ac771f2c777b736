"""Every structure of the catalogue, recognised from a log whose truth is a sum of closed-form step responses."""

import numpy as np
import pytest
import step_sums
from gainwright.ident.catalogue import CATALOGUE
from gainwright.ident.identify import identify
from gainwright.ident.modes import modes_of
from gainwright.ident.run import Run
from gainwright.ident.simulate import Grid, response

TIME = 0.05 * np.arange(640)
PROFILE = ((1.0, 1.0), (8.0, -0.5), (14.0, 0.7), (20.0, -1.0), (26.0, 0.4))


def with_zero(step, slope, zero_time):
    """Step response of (Tz s + 1) G: that of G and Tz times its slope, the impulse response of G."""
    return lambda t: step(t) + zero_time * slope(t)


def lag_slope(time_constant):
    """Impulse response of 1/(T s + 1)."""
    return lambda t: np.exp(-t / time_constant) / time_constant


def two_lags_slope(slow, fast):
    """Impulse response of 1/((T1 s + 1)(T2 s + 1))."""
    return lambda t: (np.exp(-t / slow) - np.exp(-t / fast)) / (slow - fast)


def resonance_slope(frequency, damping):
    """Impulse response of wn^2/(s^2 + 2 z wn s + wn^2): wn/sqrt(1 - z^2) exp(-z wn t) sin wd t."""
    root = np.sqrt(1 - damping**2)
    return lambda t: frequency / root * np.exp(-damping * frequency * t) * np.sin(frequency * root * t)


def resonance_behind_lag(frequency, damping, lag):
    """Step response by partial fractions: 1 - a exp(-t/T) - Re(b exp(p t)), p = -z wn + j wd.

    a and b are minus the residues of G(s)/s at -1/T and (twice) at p.
    """
    pole = complex(-damping * frequency, frequency * np.sqrt(1 - damping**2))
    square = frequency**2
    a = square / ((1 / lag) ** 2 - 2 * damping * frequency / lag + square)
    b = -2 * square / ((lag * pole + 1) * pole * 2j * pole.imag)
    return lambda t: 1 - a * np.exp(-t / lag) - (b * np.exp(pole * t)).real


def double_integrator(t):
    """Step response of 1/s^2."""
    return t**2 / 2


def double_integrator_with_lag(lag):
    """Step response of 1/(s^2 (T s + 1)): t^2/2 - T t + T^2 (1 - exp(-t/T))."""
    return lambda t: t**2 / 2 - lag * t - lag**2 * np.expm1(-t / lag)


def log(step, gain, dead_time, dB, seed):
    """A record from rest, with white noise `dB` below the movement."""
    command = step_sums.steps(TIME, PROFILE, 0.0)
    clean = step_sums.response(step, gain, dead_time, TIME, command, 0.0)
    noise = np.random.default_rng(seed).normal(0.0, 10 ** (-dB / 20) * np.std(clean), TIME.size)
    return Run("made", TIME, command, 4.0 + clean + noise, command_before=0.0)


CASES = {
    "gain": ("gain", lambda t: np.ones_like(t), {}),
    "lag that answers at once": (
        "lag with zero",
        with_zero(step_sums.lag(1.0), lag_slope(1.0), 0.3),
        {"time constant": 1.0, "zero time": 0.3},
    ),
    "lag that first turns the wrong way": (
        "lag with zero",
        with_zero(step_sums.lag(1.0), lag_slope(1.0), -0.5),
        {"time constant": 1.0, "zero time": -0.5},
    ),
    "body with a slow wall": (
        "two lags with zero",
        with_zero(step_sums.two_lags(4.0, 0.8), two_lags_slope(4.0, 0.8), 3.2),
        {"time constant 1": 4.0, "time constant 2": 0.8, "zero time": 3.2},
    ),
    "two lags that first turn the wrong way": (
        "two lags with zero",
        with_zero(step_sums.two_lags(1.4, 0.6), two_lags_slope(1.4, 0.6), -0.8),
        {"time constant 1": 1.4, "time constant 2": 0.6, "zero time": -0.8},
    ),
    "resonance with zero": (
        "resonance with zero",
        with_zero(step_sums.resonance(3.0, 0.2), resonance_slope(3.0, 0.2), 0.6),
        {"natural frequency": 3.0, "damping ratio": 0.2, "zero time": 0.6},
    ),
    "resonance behind a lag": (
        "resonance behind a lag",
        resonance_behind_lag(3.0, 0.15, 0.8),
        {"natural frequency": 3.0, "damping ratio": 0.15, "time constant": 0.8},
    ),
    "double integrator": ("double integrator", double_integrator, {}),
    "double integrator with lag": (
        "double integrator with lag",
        double_integrator_with_lag(1.0),
        {"time constant": 1.0},
    ),
}


@pytest.mark.parametrize("dead_time", [0.02, 0.47])
@pytest.mark.parametrize("case", CASES)
def test_each_further_structure_is_recognised_and_its_numbers_lie_near_their_intervals(case, dead_time):
    """Noise 35 dB below the movement; the structure by name, alone or in a tie, the truth within 1.6 half intervals.

    A 95 % interval is two standard errors to each side; three of them leave one false alarm in some hundred numbers.
    """
    name, step, shapes = CASES[case]
    fit = identify([log(step, -1.5, dead_time, 35.0, 7)])
    assert fit.structure == name
    truth = {"gain": -1.5, "dead time": dead_time, **shapes}
    assert [parameter.name for parameter in fit.parameters] == list(truth)
    for parameter in fit.parameters:
        half = 0.5 * (parameter.high - parameter.low)
        assert abs(truth[parameter.name] - 0.5 * (parameter.low + parameter.high)) < 1.6 * half + 1e-9, parameter.name
    # the noise is 10^(-35/20) of the movement, known to 1/sqrt(2 * 640) = 3 %
    assert fit.misfit == pytest.approx(10 ** (-35 / 20), rel=0.12)
    zero = shapes.get("zero time")
    if zero is not None:
        assert fit.plant.zeros == pytest.approx([-1.0 / zero], rel=0.15)
        zeros = np.array([plant.zeros[0].real for plant in fit.plausible.plants if len(plant.zeros)])
        assert np.median(zeros) == pytest.approx(-1.0 / zero, rel=0.15)


def test_names_are_words_and_none_is_given_twice():
    """Words and spaces only, in the catalogue and for every parameter."""
    names = [structure.name for structure in CATALOGUE]
    assert len(set(names)) == len(names)
    for structure in CATALOGUE:
        for name in [structure.name, *(parameter.name for parameter in structure.parameters)]:
            assert name.replace(" ", "").replace("1", "").replace("2", "").isalpha(), name


@pytest.mark.parametrize("even", [True, False])
@pytest.mark.parametrize("dead_time", [0.0, 0.33, 0.4])
def test_a_double_integrator_is_exact_under_a_held_step_and_under_a_ramp(even, dead_time):
    """K (t^2/2 - T t + T^2 (1 - exp(-t/T))) after a step; its integral after a ramp; to rounding."""
    gain, lag = 2.0, 0.7
    time = 0.1 * np.arange(100)
    time = time if even else np.sort(np.concatenate([time, time[5:50] + 0.037]))
    modes = modes_of((gain,), (lag, 1.0, 0.0, 0.0))
    x = np.maximum(time - 1.0 - dead_time, 0.0)
    stepped = gain * double_integrator_with_lag(lag)(x)
    ramped = gain * (x**3 / 6 - lag * x**2 / 2 + lag**2 * x + lag**3 * np.expm1(-x / lag))
    step, ramp = np.where(time > 1.0 - 1e-9, 1.0, 0.0), np.maximum(time - 1.0, 0.0)
    interval = 0.1 if even else None
    held = response(modes, Grid(time, step, interval, False), dead_time)
    straight = response(modes, Grid(time, ramp, interval, True), dead_time)
    assert np.max(np.abs(held - stepped)) < 1e-11 * np.max(stepped)
    assert np.max(np.abs(straight - ramped)) < 1e-11 * np.max(ramped)
