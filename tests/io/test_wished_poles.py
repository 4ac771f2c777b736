"""`process --wish`: K at a wished pole in closed form, in terminal, sheet and report; and what is refused."""

import json
import math
from pathlib import Path

import numpy as np
import pytest
from gainwright.io.commands.main import main
from gainwright.io.wish import read_wish

MOTOR = """[rig]
name = "known"
[plant]
numerator = [1.0]
denominator = [1.0, 2.0, 0.0]
[controller]
structures = ["P"]
"""


def process(folder: Path, text: str, *options: str) -> int:
    """The command on this rig file, results in `out`."""
    (folder / "rig.toml").write_text(text, "utf-8")
    return main(["process", str(folder / "rig.toml"), *options])


def answers(folder: Path) -> list[dict]:
    """As the sheet has them."""
    return json.loads((folder / "out" / "gains.json").read_text("utf-8"))["wishes"]


def test_a_wish_on_the_locus_is_answered_by_its_gain_and_one_beside_it_by_the_nearest_point(tmp_path, capsys) -> None:
    """K/(s (s + 2)): the locus is the line Re s = -1 and the axis from -2 to 0. At -1 + 2j K = |s| |s + 2| = 5; beside
    the line at -1.5 + 4j K would be sqrt(18.25 * 16.25), the angle is off by 180 less the two arctangents, and the foot
    is -1 + 4j with K = 17; damping 0.5 at 2 rad/s is on it with K = 4."""
    code = process(
        tmp_path, MOTOR, "--wish", "-1+2j", "--wish", "-90 - 240j 1/min", "--wish", "damping 0.5, frequency 2 rad/s"
    )
    assert code == 3  # nothing was held out
    on, beside, damped = answers(tmp_path)
    assert on["on_locus"]
    assert on["loop_gain"] == pytest.approx(5.0, rel=1e-12)
    assert on["nearest"]["distance"] == 0.0
    assert on["nearest"]["all_hold"]  # nothing is asked: stable from nothing to no end
    assert beside["point"] == [-1.5, 4.0]
    assert not beside["on_locus"]
    assert beside["loop_gain"] == pytest.approx(math.sqrt(18.25 * 16.25), rel=1e-12)
    turned = math.degrees(math.atan2(4.0, -1.5) + math.atan2(4.0, 0.5))
    assert beside["angle_residual"] == pytest.approx(180.0 - turned, abs=1e-9)
    assert beside["nearest"]["point"] == pytest.approx([-1.0, 4.0], abs=1e-9)
    assert beside["nearest"]["loop_gain"] == pytest.approx(17.0, rel=1e-9)
    assert beside["nearest"]["distance"] == pytest.approx(0.5, rel=1e-9)
    assert damped["point"] == pytest.approx([-1.0, math.sqrt(3.0)], rel=1e-12)
    assert damped["on_locus"]
    assert damped["loop_gain"] == pytest.approx(4.0, rel=1e-12)

    shown = capsys.readouterr().out
    assert max(len(line) for line in shown.splitlines()) <= 100
    flat = " ".join(shown.split())
    assert "Wished pole -1 + 2j 1/s is on the locus at K = 5" in flat
    assert "Wished pole -1 + 1.732j 1/s (damping 0.5, frequency 2 rad/s) is on the locus at K = 4" in flat
    assert "Wished pole -1.5 + 4j 1/s is not on the locus of these zeros" in flat
    assert "the nearest point is -1 + 4j 1/s, 0.5 1/s away, at K = 17" in flat

    page = (tmp_path / "out" / "report.html").read_text("utf-8")
    table = page[page.index("Wished poles, with the zeros that were chosen") :]
    for part in ("-1 + 2j", "-1.5 + 4j", "-1 + 4j", "(damping 0.5, frequency 2 rad/s)", "Working at the wished point"):
        assert part in table


def test_the_sampled_loop_is_asked_with_its_hold_and_delay(tmp_path) -> None:
    """PI on a lag with dead time under a hold: 1/|G_L| written out, zeros from the sheet; the nearest point is a root
    of 1 + K G_L, and no root of nearby gains is nearer (Newton, own formula)."""
    text = """[rig]
name = "known"
[plant]
numerator = [2.0]
denominator = [1.0, 1.0]
dead_time = "0.2 s"
[controller]
structures = ["PI"]
update_interval = "50 ms"
computation_delay = "5 ms"
[requirements]
test_step = "1"
overshoot = { at_most = "15 %" }
settling_time = { at_most = "5 s", band = "2 %" }
"""
    assert process(tmp_path, text, "--no-report", "--wish=-1.2+1.9j") == 3
    sheet = json.loads((tmp_path / "out" / "gains.json").read_text("utf-8"))
    parallel = sheet["candidate"]["controller"]["forms"]["parallel"]
    zero = parallel["integral"]["value"] / parallel["proportional"]["value"]

    def shape(s: complex) -> complex:
        hold = (1.0 - np.exp(-0.05 * s)) / (0.05 * s)
        return (s + zero) / s * 2.0 / (s + 1.0) * np.exp(-0.205 * s) * hold

    [found], wished = sheet["wishes"], -1.2 + 1.9j
    assert found["loop_gain"] == pytest.approx(1.0 / abs(shape(wished)), rel=1e-9)
    residual = math.degrees(np.angle(-shape(wished)))
    assert found["angle_residual"] == pytest.approx(residual, abs=1e-7)
    near, gain = complex(*found["nearest"]["point"]), found["nearest"]["loop_gain"]
    assert abs(1.0 + gain * shape(near)) < 1e-9
    s, least = near, math.inf
    for other in np.concatenate([gain * np.geomspace(1.0, 1.5, 400), gain * np.geomspace(1.5, 0.6, 900)]):
        for _ in range(4):
            slope = (shape(s + 1e-6) - shape(s - 1e-6)) / 2e-6
            s -= (1.0 + other * shape(s)) / (other * slope)
        least = min(least, abs(s - wished))
    assert abs(near - wished) <= least + 1e-9
    assert least == pytest.approx(abs(near - wished), rel=1e-4)


def test_where_nothing_was_wished_nothing_is_said(tmp_path, capsys) -> None:
    """The sheet's list is empty."""
    process(tmp_path, MOTOR, "--no-report")
    assert answers(tmp_path) == []
    assert "Wished" not in capsys.readouterr().out


@pytest.mark.parametrize(
    ("wish", "said"),
    [
        ("abc", "can't be read"),
        ("-3+4", "can't be read"),
        ("", "can't be read"),
        ("1e400j", "can't be read"),
        ("-3+4j Hz", "not a unit of a pole"),
        ("-3+4j mm", "not a unit of a pole"),
        ("damping 1.5, frequency 5 rad/s", "no pole pair has this damping ratio"),
        ("damping 0.6, frequency 5", "the frequency must be above zero, with its unit"),
        ("overshoot 0 %, peak 1 s", "no pole pair has this overshoot"),
        ("overshoot 10 %, peak 1", "the peak time must be above zero, with its unit"),
        ("overshoot 10 %, peak 1 mm", "mm"),
        ("j" * 10_000, "can't be read"),
    ],
)
def test_a_wish_that_is_none_ends_with_one_message_and_code_2(wish: str, said: str, tmp_path, capsys) -> None:
    """Before anything is read or written."""
    assert process(tmp_path, MOTOR, "--wish", wish) == 2
    shown = capsys.readouterr()
    assert said in shown.err
    assert "expected:" in shown.err
    assert "Traceback" not in shown.err
    assert shown.out == ""
    assert not (tmp_path / "out").exists()


@pytest.mark.parametrize(
    ("text", "point"),
    [
        ("-3+4j", -3 + 4j),
        ("-3 - 4i", -3 + 4j),
        ("\N{MINUS SIGN}3 + 4 j", -3 + 4j),
        ("j", 1j),
        ("-2", -2),
        ("-180+240j 1/min", -3 + 4j),
        ("damping 0.6, frequency 5 rad/s", -3 + 4j),
        ("damping ratio 0.6 natural frequency 0.7957747154594768 Hz", -3 + 4j),
        # exp(-pi z/sqrt(1 - z^2)) = 0.1, so that Re s = ln(0.1)/t and Im s = pi/t
        ("overshoot 10 %, peak 500 ms", complex(2.0 * math.log(0.1), 2.0 * math.pi)),
    ],
)
def test_a_wish_is_read_as_an_engineer_types_it(text: str, point: complex) -> None:
    """1/s where no unit stands; Hz are turns."""
    assert read_wish(text).point == pytest.approx(point, rel=1e-12)
