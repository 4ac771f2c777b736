"""A controller that samples too seldom is said to be so, with the interval that it would need."""

import math

import pytest
from gainwright.design.gains import Gains
from gainwright.design.requirements import ControllerSetting
from gainwright.design.slow_controller import slow_controller, ultimate_period
from gainwright.ident.plant import Plant

INTEGRATOR = Plant((1.0,), (1.0, 0.0), 0.4)


def test_the_ultimate_period_of_a_delayed_integrator_is_four_delays():
    """Exact: wu = pi/(2L) with L the dead time and half the hold, whose phase is that of a pure delay."""
    period = ultimate_period(Gains("P", 0.5), INTEGRATOR, ControllerSetting(0.2))
    assert period == pytest.approx(4.0 * 0.5, rel=1e-9)
    assert ultimate_period(Gains("P", 0.5), INTEGRATOR, ControllerSetting(0.0, continuous=True)) == pytest.approx(1.6)


def test_a_lag_alone_under_a_continuous_p_has_no_ultimate_period():
    """1/(s+1) is stable at every gain."""
    lag, setting = Plant((1.0,), (1.0, 1.0)), ControllerSetting(0.0, continuous=True)
    assert ultimate_period(Gains("P", 3.0), lag, setting) == math.inf


def test_four_samples_a_period_are_said_to_be_few_and_twenty_are_not():
    """Hold of 0.8 s: L = 0.8 s, the period 3.2 s is four samples, 0.32 s would give ten; 0.1 s: eighteen."""
    (said,) = slow_controller(Gains("P", 0.5), INTEGRATOR, ControllerSetting(0.8))
    assert "4 samples" in said
    assert "3.2 s" in said
    assert "0.32 s" in said
    assert slow_controller(Gains("P", 0.5), INTEGRATOR, ControllerSetting(0.1)) == ()
