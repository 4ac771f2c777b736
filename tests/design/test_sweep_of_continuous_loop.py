"""The moving sheet's sweep of a controller that isn't sampled, against closed forms of the second-order system."""

import math

import numpy as np
import pytest
from gainwright.design.compensator import open_loop
from gainwright.design.designed import Selection
from gainwright.design.gains import Gains
from gainwright.design.requirements import ControllerSetting, Limits, Requirement, Requirements
from gainwright.design.situation import situation_of
from gainwright.design.sweep_gains import sweep_gains
from gainwright.ident.fitted import Plausible
from gainwright.ident.plant import Plant


def test_overshoot_and_poles_follow_the_closed_form_over_the_gains():
    """P on 1/(s (s + 2)): wn^2 = K and z = 1/sqrt(K); the overshoot is exp(-pi z/sqrt(1 - z^2))."""
    plant = Plant((1.0,), (1.0, 2.0, 0.0))
    items = (Requirement("overshoot", 0.3, "at_most", "%", 100.0),)
    situation = situation_of(
        operating_command=0.0, operating_response=0.0, noise=None, requirements=Requirements(items, test_step=1.0),
        limits=Limits(), setting=ControllerSetting(0.0, continuous=True),
    )  # fmt: skip
    selection = Selection(4.0, "", complex(-1.0, math.sqrt(3.0)), 0.0, complex(-1.0, math.sqrt(3.0)), (), (), ())
    some = Plausible((plant,) * 40, np.zeros(40), np.zeros(40))
    sweep = sweep_gains(Gains("P", 4.0), selection, plant, some, situation, span=(0.4, 40.0), shown=5.0)
    assert sweep.gains[-1] == pytest.approx(40.0)
    assert not sweep.capped
    swings = sweep.gains > 1.5  # below, the peak comes after the time that is watched
    damping = 1.0 / np.sqrt(sweep.gains[swings])
    exact = np.exp(-np.pi * damping / np.sqrt(1.0 - damping**2))
    assert sweep.values["overshoot"][swings] == pytest.approx(exact, abs=2e-5)
    assert sweep.bands["overshoot"].high[swings] == pytest.approx(exact, abs=1e-3)
    found = np.array(sweep.poles)
    assert np.sort(found.real, axis=0)[-1, swings] == pytest.approx(-np.ones(int(swings.sum())), abs=1e-9)
    loop = open_loop(Gains("P", 4.0), plant, situation.setting)
    assert np.abs(1.0 + sweep.gains * loop.at(found)).max() < 1e-9


def test_the_gains_end_where_the_stand_in_is_not_believed():
    """P on 1/(s + 1): stable without end, its stand-in of horizon/4000 only up to about two samples a time constant."""
    plant = Plant((1.0,), (1.0, 1.0))
    situation = situation_of(
        operating_command=0.0, operating_response=0.0, noise=None, requirements=Requirements((), test_step=1.0),
        limits=Limits(), setting=ControllerSetting(0.0, continuous=True),
    )  # fmt: skip
    selection = Selection(1.0, "", complex(-2.0), 0.0, complex(-2.0), (), (), ())
    some = Plausible((plant,) * 40, np.zeros(40), np.zeros(40))
    sweep = sweep_gains(Gains("P", 1.0), selection, plant, some, situation, span=(0.1, 1e5), shown=5.0)
    assert sweep.capped
    assert 10.0 < sweep.gains[-1] < 2.0 / sweep.fitted.exact.interval
    assert sweep.stable.all()
    assert (sweep.share_stable == 1.0).all()
