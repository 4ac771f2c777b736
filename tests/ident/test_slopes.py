"""Exact sensitivities against closed-form derivatives of step responses, and against differences."""

import numpy as np
import pytest
from gainwright.ident.catalogue import CATALOGUE, LAG, RESONANCE, Structure
from gainwright.ident.local import Local
from gainwright.ident.regression import Regression
from gainwright.ident.run import Run

EXACT = [s for s in CATALOGUE if not s.friction and s.integrators < 2 and s.shapes]


def run_of(command, interval=0.05, between="held"):
    """One evenly sampled record; its response is looked at by nobody."""
    return Run(
        "made", interval * np.arange(len(command)), command, np.zeros(len(command)), between=between, at_rest=True
    )


def test_a_step_through_a_lag_moves_as_its_closed_form_says():
    """y = 1 - exp(-x), x = (t - L)/T: dy/dlog T = -x exp(-x), dy/dL = -exp(-x)/T."""
    problem = Regression((run_of(np.where(np.arange(200) < 10, 0.0, 1.0)),), LAG, 0.0, True)
    lag, dead_time = 0.7, 0.213
    slopes = problem.at(np.array([np.log(lag), dead_time])).slopes(np.array([1.0, 0.0]))
    x = (problem.runs[0].time - 0.5 - dead_time) / lag
    expected = np.where(x > 0, [-x * np.exp(-x), -np.exp(-x) / lag], 0.0).T
    assert np.max(np.abs(slopes - expected)) < 1e-9


def test_a_step_through_a_resonance_moves_with_its_damping_as_its_closed_form_says():
    """y = 1 - exp(-z w t)(cos d t + z w/d sin d t), d = w sqrt(1 - z^2), differentiated in z by a complex step."""
    problem = Regression((run_of(np.where(np.arange(400) < 1, 0.0, 1.0)),), RESONANCE, 0.0, True)
    w, z = 3.0, 0.2
    slopes = problem.at(np.array([np.log(w), np.log(z), 0.0])).slopes(np.array([1.0, 0.0]))
    time = np.maximum(problem.runs[0].time - 0.05, 0.0)
    ratio = z * np.exp(1e-30j)
    d = w * np.sqrt(1 - ratio**2)
    y = 1 - np.exp(-ratio * w * time) * (np.cos(d * time) + ratio * w / d * np.sin(d * time))
    assert np.max(np.abs(slopes[:, 1] - y.imag / 1e-30)) < 1e-8


@pytest.mark.parametrize("between", ["held", "interpolated"])
@pytest.mark.parametrize("structure", EXACT, ids=lambda s: s.name)
def test_every_structure_moves_as_differences_of_the_exact_response_say(structure: Structure, between: str):
    """A busy command that starts unsettled; central differences of 1e-5 keep eight digits or so."""
    rng = np.random.default_rng(3)
    busy = Run("busy", 0.05 * np.arange(300), rng.standard_normal(300), np.zeros(300), between=between)
    problem = Regression((busy, run_of(np.repeat([0.0, 1.0, -1.0], 60), between=between)), structure, 0.3, False)
    theta = np.array([*rng.normal(0.0, 0.4, len(structure.shapes)), 0.1234])
    here = problem.at(theta)
    coefficients = rng.standard_normal(here.columns.shape[1])
    slopes = here.slopes(coefficients)
    assert np.max(np.abs(here.moving - problem.moving_columns(*problem.split(theta)))) < 1e-12 * np.max(
        np.abs(here.moving)
    )
    for i in range(len(theta) - int(problem.jumps)):
        step = np.where(np.arange(len(theta)) == i, 1e-5, 0.0)
        expected = (problem.columns(theta + step) - problem.columns(theta - step)) @ coefficients / 2e-5
        assert np.max(np.abs(slopes[:, i] - expected)) < 2e-6 * np.max(np.abs(expected))


def test_poles_that_nearly_meet_get_differences_instead():
    """At damping ratio one the poles move without bound; the slope stays finite and true to the closed form's."""
    problem = Regression((run_of(np.where(np.arange(300) < 1, 0.0, 1.0)),), RESONANCE, 0.0, True)
    slopes = Local(problem, np.array([np.log(2.0), 0.0, 0.0])).slopes(np.array([1.0, 0.0]))
    x = 2.0 * np.maximum(problem.runs[0].time - 0.05, 0.0)
    # y = 1 - (1 + x) exp(-x) at z = 1, and dy/dlog w = x dy/dx = x^2 exp(-x)
    assert np.max(np.abs(slopes[:, 0] - x**2 * np.exp(-x))) < 1e-5
