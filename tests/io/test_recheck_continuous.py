"""Sheet and rungs of a given plant under a continuous controller against fresh logs, simulated in steps of 1 ms."""

import json
from pathlib import Path

import numpy as np
import pytest
from gainwright.io.deliver import deliver
from gainwright.io.rechecking import recheck_rung, recheck_sheet

GAIN, LAG, DEAD_TIME, STEP, LOGGED = 2.0, 1.0, 0.2, 1e-3, 50
COMMAND, RESPONSE, NOISE = 3.0, 50.0, 0.02
RIG = """
[rig]
name = "an invented rig without a sampled controller"
[signals]
time = { source = "t", unit = "s" }
command = { source = "u", unit = "V" }
response = { source = "y", unit = "mm" }
setpoint = { source = "r", unit = "mm" }
[[runs]]
file = "held_out.csv"
use = "held-out"
[plant]
numerator = [2.0]
denominator = [1.0, 1.0]
dead_time = "0.2 s"
tolerance = { gain = "10 %", dead_time = "10 %", poles = "10 %" }
[controller]
structures = ["PI"]
[requirements]
test_step = "2 mm"
overshoot = { at_most = "10 %" }
settling_time = { at_most = "5 s", band = "2 %" }
[limits]
command = { lowest = "-10 V", highest = "10 V" }
response = { lowest = "0 mm", highest = "100 mm" }
"""


def write(path: Path, command=None, setpoint=None, gains=(0.0, 0.0), seconds=40.0, seed=1, gain=GAIN) -> None:
    """A log each 50 ms: of command steps, or of a continuous PI under setpoint steps ((at, level) pairs)."""
    random = np.random.default_rng(seed)
    count, late = round(seconds / STEP), round(DEAD_TIME / STEP)
    time = STEP * np.arange(count)
    moved = np.zeros(count)
    for at, level in command or setpoint:
        moved[time >= at] = level
    u, y, integral, pole = np.zeros(count), np.zeros(count), 0.0, np.exp(-STEP / LAG)
    for k in range(count):
        if command:
            u[k] = moved[k]
        else:
            error = moved[k] - y[k]
            integral += STEP * gains[1] * error
            u[k] = gains[0] * error + integral
        if k + 1 < count:
            y[k + 1] = pole * y[k] + gain * (1.0 - pole) * (u[k - late] if k >= late else 0.0)
    kept = slice(0, count, LOGGED)
    noise = random.normal(0.0, NOISE, time[kept].size)
    goal = RESPONSE + (np.zeros(count) if command else moved)
    table = np.column_stack([time[kept], COMMAND + u[kept], RESPONSE + y[kept] + noise, goal[kept]])
    np.savetxt(path, table, fmt="%.6f", delimiter=",", header="t,u,y,r", comments="", encoding="utf-8")


FRESH = ((3.0, -1.0), (14.0, 0.8), (26.0, 0.0))


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    """A job of such a controller, delivered: a plant that was given, a held-out run, a sheet with a ladder."""
    place = tmp_path_factory.mktemp("continuous")
    (place / "rig.toml").write_text(RIG, "utf-8")
    write(place / "held_out.csv", FRESH, seed=2)
    outcome = deliver(place / "rig.toml", place / "out")
    assert outcome.design.continuous
    assert outcome.reasons == ()
    return place


def test_a_fresh_run_of_the_same_rig_leaves_the_sheet_valid(folder) -> None:
    """In open loop."""
    write(folder / "again.csv", FRESH, seed=3)
    assert recheck_sheet(folder / "out" / "gains.json", [folder / "again.csv"]).verdict == "valid"


def test_half_as_much_gain_again_makes_it_invalid(folder) -> None:
    """The same steps on another rig."""
    write(folder / "other.csv", FRESH, seed=4, gain=1.5 * GAIN)
    assert recheck_sheet(folder / "out" / "gains.json", [folder / "other.csv"]).verdict == "no longer valid"


def test_a_rung_s_log_says_climb_and_another_rig_does_not(folder) -> None:
    """The rung's own PI, run here in steps of 1 ms around the rig, and around one of three times the gain."""
    rows = json.loads((folder / "out" / "gains.json").read_text("utf-8"))["ladder"]
    row = rows[-1]
    assert row["difference_equation"] is None
    parts = row["forms"]["parallel"]
    gains = parts["proportional"]["value"], parts["integral"]["value"]
    size = row["expected"]["setpoint_to"]["value"] - row["expected"]["setpoint_from"]["value"]
    said = {}
    for name, gain in (("same", GAIN), ("other", 3.0 * GAIN)):
        write(folder / f"{name}.csv", setpoint=((3.0, size),), gains=gains, seconds=20.0, seed=5, gain=gain)
        (said[name],) = recheck_rung(folder / "out" / "gains.json", row["rung"], [folder / f"{name}.csv"])
    assert said["same"].advice == "climb", said["same"].why
    assert said["same"].outside < 0.01
    assert said["other"].advice != "climb"
