"""The verdict on one screen."""

import re
import subprocess
import sys
from dataclasses import replace

import pytest
from gainwright.design.designed import Judged
from gainwright.design.requirements import Requirement
from gainwright.io.cautions import cautions_for
from gainwright.io.terminal import slack, verdict_text


def test_a_released_verdict_fits_on_one_screen_of_a_hundred_columns(make_outcome, made):
    """At most 45 lines of 100 columns, the verdict in the first."""
    lines = verdict_text(make_outcome(cautions=cautions_for(made.rig, made.design)), 100, colour=False).splitlines()
    assert len(lines) <= 45
    assert max(map(len, lines)) <= 100
    assert lines[0].startswith("RELEASED  flume paddle")


def test_it_says_gains_with_unit_and_form_slack_and_limits(made):
    """Numbers of the made-up job; slack by hand: overshoot (10 - 7.1)/10, settling (1.6 - 1.41)/1.6."""
    text = verdict_text(made, 100, colour=False)
    assert re.search(r"parallel +proportional 0\.13 V/mm, integral 0\.21 V/\(mm s\)", text)
    assert re.search(r"standard +gain 0\.13 V/mm, integral time 0\.6190476 s", text)
    assert re.search(r"overshoot +at most 10 % +3\.12 % +0 to 7\.1 % +29 %", text)
    assert re.search(r"settling time into ±2 % +at most 1\.6 s +1\.12 s +0\.94 to 1\.41 s +12 %", text)
    assert re.search(r"command highest +10 V +5\.92 V +4\.08 V", text)
    assert "Held-out run_2.csv agrees" in text
    assert "all hold from 0.105 to 0.143" in text


def test_a_held_verdict_says_why_before_anything_else(make_outcome):
    """Reasons follow the first line; the gains are called candidates."""
    held = make_outcome(status="held", reasons=("the sensor clipped", "x" * 300))
    lines = verdict_text(held, colour=False).splitlines()
    assert lines[0].startswith("HELD  ")
    assert lines[1] == "  - the sensor clipped"
    assert any(line.startswith("Candidate gains, not released") for line in lines)
    assert max(map(len, lines)) <= 100


def test_a_pipe_gets_plain_text_and_a_terminal_gets_colour_around_the_same(made):
    """Without the escape sequences both are equal."""
    plain, painted = (verdict_text(made, 100, colour=colour) for colour in (False, True))
    assert "\x1b" not in plain
    assert "\x1b[" in painted
    assert re.sub(r"\x1b\[[0-9;]*m", "", painted) == plain


def test_names_cannot_drive_the_terminal(make_outcome):
    """Escape, carriage return, bell and line feed from names are gone."""
    bad = "a\x1b[2Jb\rc\x07d\ne"
    text = verdict_text(
        make_outcome(name=bad, files=(bad, bad), status="held", reasons=(bad,), cautions=(bad,)), colour=False
    )
    assert not re.search(r"[\x00-\x09\x0b-\x1f\x7f]", text)
    assert "a[2Jb cd e" in text


@pytest.mark.parametrize(
    ("judged", "shown"),
    [
        (Judged(Requirement("overshoot", 0.1, "at_most", "%", 100.0), 0.05, 0.0, 0.12, False), "-20 %"),
        (Judged(Requirement("phase_margin", 40.0, "at_least", "deg"), 60.0, 50.0, 70.0, True), "25 %"),
        (Judged(Requirement("gain_margin", 6.0, "at_least", "dB"), 60.0, float("inf"), float("inf"), True), "∞"),
        (Judged(Requirement("settling_time", 2.0, "at_most", "s"), None, None, None, False), "none"),
    ],
)
def test_slack_is_the_room_to_the_worse_end(judged, shown):
    """(limit - high)/limit for at most, (low - limit)/limit for at least, by hand."""
    assert slack(judged) == shown


def test_a_failed_requirement_and_a_passed_limit_stand_out(make_outcome, made):
    """In words, not only in colour."""
    judged = (replace(made.design.judged[0], met=False), *made.design.judged[1:])
    limits = (replace(made.design.limits[0], met=False), *made.design.limits[1:])
    text = verdict_text(make_outcome(design=replace(made.design, judged=judged, limits=limits)), colour=False)
    assert re.search(r"overshoot .*NOT MET", text)
    assert re.search(r"command lowest .*PASSED", text)


def test_a_job_without_a_design_has_a_verdict(make_outcome):
    """Held early: reasons, no gains."""
    text = verdict_text(make_outcome(design=None, closing=(), status="held", reasons=("nothing fits",)), colour=False)
    assert "nothing fits" in text
    assert "gains:" not in text
    assert "No held-out run." in text


def test_many_reasons_and_cautions_are_counted(make_outcome):
    """Six reasons and three cautions are shown, the rest is counted."""
    outcome = make_outcome(
        status="held", reasons=tuple(f"reason {i}" for i in range(9)), cautions=tuple(f"caution {i}" for i in range(5))
    )
    text = verdict_text(outcome, colour=False)
    assert "and 3 more reasons, in the report" in text
    assert "and 2 more cautions, in the report" in text


def test_the_terminal_needs_no_drawing_library():
    """Importing it stays cheap: no matplotlib, no jinja2, no rich."""
    code = "import sys, gainwright.io.terminal; assert not {'matplotlib', 'jinja2', 'rich'} & set(sys.modules)"
    done = subprocess.run([sys.executable, "-P", "-c", code], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
