"""When no gain works: what conflicts, how far the best gets, and bounds that would do."""

import re

import numpy as np
import pytest
from gainwright.design.design import design_gains
from gainwright.design.judge import judge_plants
from gainwright.design.requirements import ControllerSetting, Limits, Requirement, Requirements
from gainwright.ident.fitted import Plausible
from gainwright.ident.plant import Plant

NOMINAL = Plant((2.0,), (0.5, 1.0), 0.1)
OVERSHOOT = Requirement("overshoot", 0.01, "at_most", "%", 100.0)
SETTLING = Requirement("settling_time", 0.21, "at_most", "s", band=0.02)


def job(*items):
    """Keywords of a job with these requirements."""
    return {
        "operating_command": 0.0, "operating_response": 0.0, "noise": None, "requirements": Requirements(items, 1.0),
        "limits": Limits(-np.inf, np.inf, np.inf, -np.inf, np.inf, np.inf),
        "setting": ControllerSetting(0.02, 0.0, ("PI",)),
    }  # fmt: skip


def plants():
    rng = np.random.default_rng(6)
    some = [Plant((2.0 * g,), (0.5 * t, 1.0), 0.1 * d) for g, t, d in np.exp(0.03 * rng.standard_normal((250, 3)))]
    return Plausible(tuple(some), np.zeros(250), np.zeros(250))


@pytest.fixture(scope="module")
def refused():
    """Settling in twice the dead time with hardly any overshoot: PI can't."""
    return design_gains(NOMINAL, plants(), command_unit="V", response_unit="mm", **job(OVERSHOOT, SETTLING))


def test_it_says_how_far_the_best_gets(refused):
    """Asked, predicted on the fitted plant, at worst within 95 %, and the share that meets it."""
    text = " ".join(refused.reasons)
    assert re.search(r"settling time: 0\.21 s is asked; with the best gains found it is [\d.]+ s on the fitted", text)
    assert "95 % is asked" in text


def test_with_the_bounds_that_would_do_the_same_gains_do(refused):
    """The bounds of the last reason put into the job: judged anew, at least 95 % of the plants meet everything."""
    (said,) = [reason for reason in refused.reasons if reason.startswith("what would have to give")]
    eased = []
    for item in (OVERSHOOT, SETTLING):
        found = re.search(rf"{item.name.replace('_', ' ')} at most ([\d.e+-]+) {item.unit} in place of", said)
        limit = item.limit if found is None else float(found.group(1)) / item.scale
        eased.append(Requirement(item.name, limit, item.sense, item.unit, item.scale, item.band))
    floors = [reason for reason in refused.reasons if "floor" in reason]
    assert floors == []
    again = judge_plants(refused.gains, plants(), **job(*eased))
    assert again.share_meeting >= 0.95
    before = judge_plants(refused.gains, plants(), **job(OVERSHOOT, SETTLING))
    assert before.share_meeting < 0.95


def test_two_that_pull_against_each_other_are_named():
    """A noise bound that only a small gain keeps and a settling time that needs a large one."""
    slow = Plant((2.0,), (5.0, 1.0), 0.1)
    fast = Requirement("settling_time", 1.0, "at_most", "s", band=0.02)
    damped = Requirement("phase_margin", 85.0, "at_least", "deg")
    design = design_gains(
        slow, Plausible((slow,) * 60, np.zeros(60), np.zeros(60)), command_unit="V", response_unit="mm",
        **job(OVERSHOOT, fast, damped),
    )  # fmt: skip
    assert any("pull against each other" in reason for reason in design.reasons), design.reasons
