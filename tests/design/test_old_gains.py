"""Old gains on a new plant: a share of plausible plants, apart from any significance."""

import numpy as np
import pytest
from gainwright.design.gains import Gains
from gainwright.design.old_gains import judge_old_gains
from gainwright.design.requirements import ControllerSetting, Limits, Requirement, Requirements
from gainwright.ident.fitted import Plausible
from gainwright.ident.plant import Plant

T = 0.01


def judged(slopes, gain=2.0, at_most=1.5, limits=None):
    """P on k/s: the sampled pole is 1 - k P T, so into 2 % it takes T ln 50/-ln(1 - k P T)."""
    plants = tuple(Plant((float(k),), (1.0, 0.0), 0.0) for k in slopes)
    count = len(plants)
    return judge_old_gains(
        Gains("P", gain),
        plants[count // 2],
        Plausible(plants, np.zeros(count), np.zeros(count)),
        operating_command=0.0,
        operating_response=0.0,
        noise=None,
        requirements=Requirements((Requirement("settling_time", at_most, "at_most", "s", band=0.02),), 10.0),
        limits=limits or Limits(),
        setting=ControllerSetting(T),
    )


def test_the_share_is_that_of_the_plants_fast_enough():
    """0.01 ln 50/-ln(1 - 0.02 k) <= 1.5 s where k >= 1.287: of k evenly over 1 to 2, that is 71.3 %."""
    found = judged(np.linspace(1.0, 2.0, 501))
    assert found.share_meeting == pytest.approx(0.713, abs=0.003)
    assert (found.verdict, found.plants_checked) == ("replace", 501)
    assert "settling time" in found.why


def test_gains_that_still_do_are_kept():
    """Every plant settles in time."""
    found = judged(np.linspace(1.5, 2.0, 50))
    assert (found.share_meeting, found.verdict) == (1.0, "keep")


def test_one_unstable_plant_is_enough_to_replace():
    """P k T = 2.4 > 2: the sampled integrator 1 - P k T leaves the unit circle; the share alone would still pass."""
    found = judged([1.5] * 99 + [120.0])
    assert found.share_meeting == pytest.approx(0.99)
    assert found.verdict == "replace"
    assert "UNSTABLE" in found.why


def test_a_limit_that_is_passed_replaces_too():
    """The step ends at 10, and 9 is the highest."""
    found = judged(np.linspace(1.5, 2.0, 20), limits=Limits(response_highest=9.0, response_lowest=-9.0))
    assert found.verdict == "replace"
    assert "LIMIT" in found.why
