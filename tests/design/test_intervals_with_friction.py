"""The gain sets count the friction of the fitted plant, as everything else on the page does."""

import dataclasses

import numpy as np
import pytest
from gainwright.design.design import design_gains
from gainwright.design.judge import judge_plants
from gainwright.design.requirements import ControllerSetting, Limits, Requirement, Requirements
from gainwright.ident.fitted import Plausible
from gainwright.ident.plant import Plant

SERVO = Plant((3.0,), (0.1, 1.0, 0.0), 0.05)
STICKS = 0.06
ITEMS = (
    Requirement("overshoot", 0.10, "at_most", "%", 100.0),
    Requirement("steady_state_error", 0.08, "at_most", "mm"),
)


def job():
    return {
        "operating_command": 0.0, "operating_response": 0.0, "noise": None, "requirements": Requirements(ITEMS, 5.0),
        "limits": Limits(-10.0, 10.0, np.inf, -50.0, 50.0, np.inf), "setting": ControllerSetting(0.01, 0.0, ("P",)),
    }  # fmt: skip


@pytest.fixture(scope="module")
def done():
    """P on a servo that sticks by 0.06 V."""
    rng = np.random.default_rng(4)
    plants = tuple(Plant((3.0 * g,), (0.1, 1.0, 0.0), 0.05) for g in np.exp(0.02 * rng.standard_normal(60)))
    plausible = Plausible(plants, np.zeros(60), np.full(60, STICKS))
    return design_gains(SERVO, plausible, command_unit="V", response_unit="mm", **job())


def held_at(done, loop_gain):
    gains = dataclasses.replace(done.gains, proportional=loop_gain)
    verdicts = judge_plants(gains, Plausible((SERVO,), np.zeros(1), np.array([STICKS])), **job())
    return bool(all(verdicts.met(item)[0] for item in verdicts.items[:2]))


def test_inside_the_intervals_the_sticking_plant_meets_everything_and_beside_them_not(done):
    """Judged with friction, 0.5 % to either side of each end."""
    assert done.selection.intervals
    for low, high in done.selection.intervals:
        assert [held_at(done, k) for k in (low * 1.005, low * 0.995)] == [True, False]
        assert [held_at(done, k) for k in (high * 0.995, high * 1.005)] == [True, False]
    assert any(low <= done.selection.loop_gain <= high for low, high in done.selection.intervals)


def test_friction_sets_the_least_gain(done):
    """At rest it may hold back 0.06 V, an error of 0.06/P (closed form): 0.08 mm needs P = 0.75 V/mm, which without
    friction any gain would meet."""
    rows = dict(done.selection.rows)
    assert rows["steady_state_error"][0][0] == pytest.approx(STICKS / 0.08, rel=1e-6)


def test_the_plausible_share_counts_it_too(done):
    """All plants stick by the same 0.06 V, so no share of them holds below that gain."""
    assert done.selection.intervals_plausible
    assert done.selection.intervals_plausible[0][0] >= STICKS / 0.08 * 0.99
