"""`inspect` for programs: one JSON value with what the lines say, also for logs that can't be used."""

import json
from pathlib import Path

import numpy as np
import pytest
from gainwright.io.commands.main import main
from gainwright.io.inspection import inspect_log
from gainwright.io.readers import parts

RIG = """
[rig]
name = "bench"
[signals]
time = { source = "t", unit = "s" }
command = { source = "u", unit = "V" }
response = { source = "y", unit = "mm" }
[[runs]]
file = "run.csv"
use = "fit"
[controller]
update_interval = "20 ms"
structures = ["P"]
[requirements]
test_step = "1 mm"
[limits]
command = { lowest = "-10 V", highest = "10 V" }
response = "not limited"
"""


@pytest.fixture
def log(tmp_path: Path) -> Path:
    """A step of 1 V at 1 s on a lag, 500 samples, one response lost; its response clipped in `clipped.csv`."""
    t = 0.02 * np.arange(500)
    u = np.where(t < 1.0, 0.0, 1.0)
    y = 3.0 + 2.0 * (1.0 - np.exp(-np.clip(t - 1.0, 0.0, None) / 0.5))
    y += np.random.default_rng(4).normal(0.0, 0.02, t.size)
    for name, values in (("run.csv", y), ("clipped.csv", np.minimum(y, 4.5))):
        cells = [f"{values[row]:.4f}" if row != 77 else "" for row in range(t.size)]
        rows = [f"{t[row]:.2f},{u[row]:.1f},{cells[row]}" for row in range(t.size)]
        (tmp_path / name).write_text("t [s],u [V],y [mm]\n" + "\n".join(rows) + "\n", "utf-8")
    (tmp_path / "rig.toml").write_text(RIG, "utf-8")
    return tmp_path / "run.csv"


def printed(capsys: pytest.CaptureFixture[str]) -> dict:
    return json.loads(capsys.readouterr().out)


def test_channels_come_as_numbers_with_units(log: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Without a rig file: names, units, counts and extremes of the log, and how its time runs."""
    assert main(["inspect", "--json", str(log)]) == 0
    (found,) = printed(capsys)["logs"]
    assert (found["usable"], found["error"]) == ("yes", None)
    time, command, response = found["channels"]
    assert time == {"name": "t", "unit": "s", "samples": 500, "lost": 0, "lowest": 0.0, "highest": 9.98}
    assert (command["unit"], command["lowest"], command["highest"]) == ("V", 0.0, 1.0)
    assert (response["unit"], response["lost"]) == ("mm", 1)
    (clock,) = found["clocks"]
    assert clock["name"] == "t"
    assert clock["step"] == pytest.approx(0.02, rel=1e-9)
    assert clock["whole"] == pytest.approx(9.98, rel=1e-9)


def test_findings_and_logs_that_cannot_be_used_stand_side_by_side(
    log: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """With a rig file: a sound log, a clipped one (3) and one that is no log (4, the gravest) in one value."""
    folder = log.parent
    (folder / "empty.csv").write_text("", "utf-8")
    asked = ["inspect", "--json", "--rig", str(folder / "rig.toml")]
    assert main([*asked, str(folder / "clipped.csv")]) == 3
    (clipped,) = printed(capsys)["logs"]
    assert clipped["usable"] == "holds"
    assert {each["kind"]: each["refuses"] for each in clipped["findings"]}["clipping"] == "holds"
    assert main([*asked, str(log), str(folder / "clipped.csv"), str(folder / "empty.csv")]) == 4
    said = printed(capsys)
    assert said["schema"] == "gainwright.inspection/1"
    assert [each["usable"] for each in said["logs"]] == ["yes", "holds", "no"]
    assert "the log is empty" in said["logs"][2]["error"]


def test_a_large_log_is_summed_up_part_by_part(log: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """In parts of 100 samples every count, extreme and interval is what it is in one."""
    whole = inspect_log(log)
    monkeypatch.setattr(parts, "LARGEST_WHOLE", 400)
    monkeypatch.setattr(parts, "PART", 100)
    by_parts = inspect_log(log)
    assert by_parts.text == whole.text
    assert by_parts.channels == whole.channels
