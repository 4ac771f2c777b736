"""Logs taken in closed loop: the noise moves the command through the controller, and biases what ignores its colour."""

import numpy as np
import pytest
from gainwright.ident.catalogue import LAG
from gainwright.ident.identify import identify
from gainwright.ident.run import Run
from gainwright.ident.spectra import spectra
from scipy.signal import lfilter

INTERVAL, GAIN, LAG_TIME = 0.1, 2.0, 1.0


def closed_loop_log(seed, count=3000, colour=0.8, size=0.2):
    """A lag under PI control, the setpoint stepping between two levels, AR(1) noise of this size fed back; exact."""
    rng = np.random.default_rng(seed)
    setpoint = np.repeat(rng.choice([-1.0, 1.0], count // 40), 40)
    noise = lfilter([1.0], [1.0, -colour], rng.standard_normal(count)) * size * np.sqrt(1 - colour**2)
    decay = np.exp(-INTERVAL / LAG_TIME)
    state = integral = 0.0
    command, response = np.zeros(count), np.zeros(count)
    for k in range(count):
        response[k] = state + noise[k]
        error = setpoint[k] - response[k]
        command[k] = 1.5 * error + integral
        integral += 0.1 * error
        state = decay * state + GAIN * (1 - decay) * command[k]
    time = INTERVAL * np.arange(count)
    return Run(f"loop {seed}", time, command, response, setpoint, between="held", command_before=0.0, closed_loop=True)


def test_the_fit_is_right_where_dividing_spectra_is_off_by_forty_per_cent():
    """Noise of a quarter of the setpoint's steps: Syu/Suu is off by more than 40 % (median up to 7 rad/s).

    The mean gain of four fits is right to 1 %; a fit's spread is 0.6 % here, that of the mean 0.3 %.
    """
    away, gains = [], []
    for seed in range(4):
        run = closed_loop_log(seed, colour=0.0, size=0.25)
        found = spectra(run.command - run.command.mean(), run.response - run.response.mean(), INTERVAL, 512)
        band = (found.frequency > 0) & (found.frequency < 7.0)
        true = GAIN / (LAG_TIME * 1j * found.frequency[band] + 1.0)
        away.append(np.median(np.abs(found.response[band] / true - 1.0)))
        gains.append(identify([run], structures=[LAG]).plant.static_gain)
    assert np.mean(away) > 0.4
    assert np.mean(gains) == pytest.approx(GAIN, rel=0.01)


def test_a_plant_in_closed_loop_is_fitted_without_the_bias_of_feedback():
    """Mean of four logs within 1 % in gain and 2 % in lag; no dead time is made up where there is none.

    The dead time's own standard error is some hundredth of a sample interval here; plain least squares finds half one.
    """
    fits = [identify([closed_loop_log(seed)], structures=[LAG]) for seed in range(4)]
    gain, dead_time, lag = np.array([[p.value for p in fit.parameters] for fit in fits]).T
    assert np.mean(gain) == pytest.approx(GAIN, rel=0.01)
    assert np.mean(lag) == pytest.approx(LAG_TIME, rel=0.02)
    assert np.max(dead_time) < 0.1 * INTERVAL


def test_no_command_explains_the_very_sample_that_it_was_made_of():
    """White noise fed back, no dead time: a command ahead of its time would seem to explain the noise.

    The whole catalogue, some structures of which answer at once: the spectrum of the noise stays flat to 0.1 (a false
    optimum here had a memory of 0.8), and gain and lag are right to 3 %.
    """
    for seed in range(2):
        fit = identify([closed_loop_log(seed, colour=0.0)])
        found = {parameter.name: parameter.value for parameter in fit.parameters}
        assert abs(fit.noise.rho + fit.noise.c) < 0.1
        assert fit.plant.static_gain == pytest.approx(GAIN, rel=0.03)
        assert found["time constant"] == pytest.approx(LAG_TIME, rel=0.03)
