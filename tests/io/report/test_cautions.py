"""Cautions: the usual ones are complete and claim nothing; the others come with their numbers."""

from dataclasses import replace

import numpy as np
import pytest
from gainwright.design.designed import LimitJudged
from gainwright.design.gains import Gains
from gainwright.design.requirements import Limits
from gainwright.io.cautions import FIRST_RUN, cautions_for, derived_cautions, headroom_share


def said(made, **changes):
    """Derived cautions as one text; changes of design, rig or fit."""
    rig, design, fit = changes.get("rig", made.rig), changes.get("design", made.design), changes.get("fit", made.fit)
    return "\n".join(derived_cautions(rig, design, fit))


@pytest.mark.parametrize(
    "word",
    [
        "Guard", "emergency stop", "Isolate the energy", "stored energy", "vertical", "lost, frozen or reversed sensor",
        "End stops", "over-temperature", "independently of this loop", "Local codes", "licensed",
    ],
)  # fmt: skip
def test_the_usual_cautions_name_what_a_first_run_needs(word):
    """The list of issue 2, point 7, each by its own word."""
    assert word in " ".join(FIRST_RUN)


@pytest.mark.parametrize(
    ("standard", "title"),
    [
        # titles: facts/check_values.md SF-01 to SF-04
        ("ISO 12100", "General principles for design - Risk assessment and risk reduction"),
        ("IEC 60204-1", "Electrical equipment of machines - General requirements"),
        ("ISO 13850", "Emergency stop function - Principles for design"),
        ("ISO 13849-1", "Safety-related parts of control systems - General principles for design"),
    ],
)
def test_standards_are_cited_by_title_and_no_compliance_is_claimed(standard, title):
    """Title and scope only; the word compliance comes with a denial."""
    text = " ".join(FIRST_RUN)
    assert standard in text
    assert title in text
    assert text.count("compl") == text.count("No compliance") == 1


def test_the_usual_cautions_come_last_and_whole(made):
    """What is particular comes first."""
    every = cautions_for(made.rig, made.design, made.fit)
    assert every[-len(FIRST_RUN) :] == FIRST_RUN
    assert cautions_for(made.rig, None) == (*derived_cautions(made.rig, None), *FIRST_RUN)


def test_a_missing_limit_is_said_in_capitals_with_the_key_to_write(made):
    """Only the response rate is missing in the made-up rig; "not limited" is a given limit."""
    text = said(made)
    assert text.count("MISSING LIMIT") == 1
    assert "MISSING LIMIT: response rate was not given" in text
    assert '[limits] response_rate = { highest = "..." }' in text
    none = said(made, rig=replace(made.rig, limits=Limits()))
    assert none.count("MISSING LIMIT") == 6
    assert '[limits] command = { lowest = "..." }' in none
    free = Limits(-10.0, 10.0, 200.0, float("-inf"), float("inf"), float("inf"))
    assert "MISSING LIMIT" not in said(made, rig=replace(made.rig, limits=free))


@pytest.mark.parametrize(
    ("judged", "start", "share"),
    [
        (LimitJudged("command highest", 10.0, 9.3, "V", 0.7, True), 3.0, 0.1),  # (10 - 9.3)/(10 - 3)
        (LimitJudged("response lowest", 0.0, 30.0, "mm", 30.0, True), 120.0, 0.25),  # 30/120
        (LimitJudged("command rate", 200.0, 150.0, "V/s", 50.0, True), 3.0, 0.25),  # from rest: 50/200
        (LimitJudged("command highest", float("inf"), 9.3, "V", float("inf"), True), 3.0, None),
    ],
)
def test_headroom_is_a_share_of_the_way_from_the_operating_point(judged, start, share):
    """By hand, beside each case."""
    assert headroom_share(judged, start) == (None if share is None else pytest.approx(share))


def test_headroom_under_a_tenth_is_said_with_its_numbers(made):
    """From 3 V to 10 V, worst 9.6 V: 0.4/7 = 5.7 % left."""
    limit = LimitJudged("command highest", 10.0, 9.6, "V", 0.4, True)
    text = said(made, design=replace(made.design, limits=(limit,)))
    assert "Little headroom: command highest reaches 9.6 V of 10 V on the worst plausible plant, 5.7 %" in text
    roomy = replace(limit, predicted_worst=9.2, headroom=0.8)
    assert "headroom" not in said(made, design=replace(made.design, limits=(roomy,)))


def test_a_passed_limit_is_said_as_passed(made):
    """301 mm where 300 mm is the limit."""
    limit = LimitJudged("response highest", 300.0, 301.0, "mm", -1.0, False)
    text = said(made, design=replace(made.design, limits=(limit,)))
    assert "Limit passed: response highest reaches 301 mm on the worst plausible plant, and 300 mm" in text


def test_a_clamped_command_comes_with_share_and_duration(made):
    """12.5 % of the plants, 0.34 s."""
    text = said(made, design=replace(made.design, clamped_share=0.125, clamped_duration=0.34))
    assert "limited during the test step on 12.5 % of the plausible plants, for 0.34 s at the longest" in text
    assert "limited during" not in said(made)


def test_an_actuator_near_its_bound_cannot_push_back(made):
    """A heater at 6 % of 0 to 100 %: 6 % left downwards; at 50 % there is no such caution."""
    rig = replace(made.rig, limits=Limits(0.0, 100.0, 1e3, 0.0, 300.0, 1e3), command_unit="%")
    near = said(made, rig=rig, fit=replace(made.fit, operating_command=6.0))
    assert "can't push back: the operating command of 6 % leaves 6 % down to the bound of 0 %" in near
    assert "push back" not in said(made, rig=rig, fit=replace(made.fit, operating_command=50.0))


def test_a_heater_whose_command_falls_to_zero_cannot_push_back_either(made):
    """Operating in the middle, but the test step drives the command to the bound of a one-sided actuator."""
    rig = replace(made.rig, limits=Limits(0.0, 10.0, 1e3, 0.0, 300.0, 1e3))
    low = made.design.trajectory.command_low.copy()
    low[40:60] = 0.0
    design = replace(made.design, trajectory=replace(made.design.trajectory, command_low=low))
    assert "can't push back" in said(made, rig=rig, design=design)
    assert "can't push back" not in said(made, rig=rig)


def test_loud_command_noise_is_said_against_the_range(made):
    """0.5 V rms of a range of 20 V: 6 * 0.5/20 = 15 %; 0.065 V is 2 % and stays unsaid."""
    loud = list(made.design.judged)
    loud[3] = replace(loud[3], predicted=0.5)
    text = said(made, design=replace(made.design, judged=tuple(loud)))
    assert "moves the command by 0.5 V rms, peaks of about 15 % of its range" in text
    assert "moves the command" not in said(made)


def test_unjudged_command_noise_is_taken_from_the_direct_path(made):
    """Coefficient of the present response 5 V/mm times noise of 0.5 mm: 2.5 V."""
    law = replace(made.design.law, response=(5.0, -4.0))
    text = said(made, design=replace(made.design, judged=(), law=law))
    assert "moves the command by 2.5 V rms" in text


def test_slow_sampling_is_said_when_the_sampled_pole_stands_apart(made):
    """6 % away from a pole: said; 0.3 % in the made-up job: not said."""
    pole = made.design.selection.pole
    apart = replace(made.design.selection, sampled_pole=pole * 1.06)
    assert "stands 6 % away from the chosen point" in said(made, design=replace(made.design, selection=apart))
    assert "Sampling is slow" not in said(made)


def test_integral_action_on_a_rig_that_sticks_may_hunt(made):
    """Half of the plants stick by 0.2 V or more; without integral action, or without stiction, nothing is said."""
    plausible = replace(made.fit.plausible, stiction=np.linspace(0.0, 0.4, 40))
    fit = replace(made.fit, plausible=plausible)
    assert "may hunt slowly about the setpoint" in said(made, fit=fit)
    assert "up to 0.4 V" in said(made, fit=fit)
    assert "hunt" not in said(made)
    assert "hunt" not in said(made, fit=fit, design=replace(made.design, gains=Gains("P", 0.1)))


def test_without_a_fit_the_operating_command_comes_from_the_clamp(made):
    """Absolute 10 V, deviation 7 V: it is 3 V, and 9.6 V leaves 5.7 %."""
    limit = LimitJudged("command highest", 10.0, 9.6, "V", 0.4, True)
    assert "5.7 %" in said(made, design=replace(made.design, limits=(limit,)), fit=None)
