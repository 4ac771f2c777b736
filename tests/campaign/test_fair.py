"""The loop that rules and search are judged on, against closed forms; and one set through the whole comparison."""

import numpy as np
import paths  # noqa: F401  (puts the folder on the path)
import pytest
from against_rules import one_set
from fair_loop import Truth, peak_sensitivity, pid_laws, run, step_values, ultimate
from fair_sets import Model, draw_problem, fitted, pulse_responses
from scipy import signal


def one_law(interval, proportional, integral=0.0, derivative=0.0, filter_time=0.0):
    return pid_laws(interval, *(np.array([x]) for x in (proportional, integral, derivative, filter_time)))


def test_the_ultimate_gain_of_a_delayed_integrator():
    """DT-01 with the hold's half interval in the delay: Ku = pi/(2 L), Pu = 4 L, to (w T)^2/24."""
    gain, period = ultimate(Truth((1.0,), (1.0, 0.0), 0.5), 0.02)
    assert gain == pytest.approx(np.pi / (2.0 * 0.51), rel=3e-4)
    assert period == pytest.approx(4.0 * 0.51, rel=1e-5)


def test_a_step_under_p_is_that_of_the_recursion():
    """P on 1/s sampled: y[k+1] = y[k] + x (1 - y[k]), x = P T; a dead time of 1.3 samples delays it by that."""
    times, out = run(Truth((1.0,), (1.0, 0.0), 0.0), one_law(0.1, 2.0), 30)
    assert out[9::5, 0][0] == pytest.approx(1.0 - 0.8**2, abs=1e-12)
    late_times, late = run(Truth((1.0,), (1.0, 0.0), 0.13), one_law(0.1, 1e-6), 30)
    assert late[np.searchsorted(late_times, 0.13 - 1e-9), 0] == pytest.approx(0.0, abs=1e-15)
    assert late[-1, 0] == pytest.approx(1e-6 * (late_times[-1] - 0.13), rel=1e-4)
    # 0.8^17 = 0.0225, 0.8^18 = 0.0180, straight between: 2 % at 1.756 s, seen on a grid of 0.02 s
    assert step_values(times, out)[1][0] == pytest.approx(1.756, abs=0.021)


def test_sensitivity_of_a_known_loop():
    """TU-01: SIMC on a lag with dead time has Ms 1.5905; sampled 400 times in the dead time within 1 %."""
    laws = one_law(1.0 / 400, 2.0, 0.5)
    assert peak_sensitivity(Truth((1.0,), (4.0, 1.0), 1.0), laws, 2000)[0] == pytest.approx(1.5905, rel=0.01)


@pytest.mark.parametrize("integrators", [0, 1])
def test_the_pulse_response_is_scipys(integrators):
    """Two lags with dead time, with and without an integrator; the pulse falls on whole steps of the grid."""
    model = Model(1.3, (1.0, 0.4), 0.3, integrators)
    times = np.linspace(0.0, 20.0, 401)
    command = np.where((times >= 0.3 - 1e-9) & (times < 5.3 - 1e-9), 1.0, 0.0)
    _, wanted, _ = signal.lsim(([1.3], model.denominator), command, times, interp=False)
    found = pulse_responses(np.log([[1.3, 0.3, 1.0, 0.4]]), integrators, times, 5.0)[:, 0]
    assert found == pytest.approx(wanted, abs=1e-4)


def test_the_fit_finds_its_model_and_its_plants_stay_near_the_record():
    """Gain within four of its standard deviations; every plausible plant within noise of the fitted response."""
    rng = np.random.default_rng(4)
    model = Model(2.0, (1.0,), 0.5)
    fit = fitted(model, rng)
    assert fit.model.gain == pytest.approx(2.0, abs=8.0 * np.sqrt(np.linalg.inv(fit.precision)[0, 0]))
    own = fit.model.pulse_response(fit.times, fit.width)
    some = fit.plausible(rng, 50)
    assert len({plant.gain for plant in some}) > 40
    for plant in some:
        assert np.sqrt(np.mean((plant.pulse_response(fit.times, fit.width) - own) ** 2)) < 0.5 * fit.noise


@pytest.mark.timeout(600)
def test_one_set_through_the_whole_comparison():
    """A lag with dead time, a loose set: the search meets it on the truth and on 95 % of fresh plants."""
    row = one_set(draw_problem(6, 0, "loose"), 0)
    assert row["found"]
    assert row["truth"]
    assert row["share"] >= 0.95
    assert len(row["rules"]) >= 10
