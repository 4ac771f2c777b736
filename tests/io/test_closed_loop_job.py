"""Fit and held-out runs that were taken in closed loop, through the whole job."""

from pathlib import Path

import numpy as np
import pytest
from gainwright.ident.errors import RecordError
from gainwright.ident.identify import identify
from gainwright.ident.plant import Plant
from gainwright.io.deliver import deliver
from gainwright.io.job import process_rig
from gainwright.io.read_record import read_record
from gainwright.io.rigfile.load import load_rig

from .loops import COMMAND, DEAD_TIME, GAIN, LAG, RESPONSE, run_loop, write

RIG = """
[rig]
name = "an invented rig under control"
[signals]
time = {{ source = "t", unit = "s" }}
command = {{ source = "u", unit = "V" }}
response = {{ source = "y", unit = "mm" }}
setpoint = {{ source = "r", unit = "mm" }}
{runs}
[controller]
update_interval = "50 ms"
structures = ["PI"]
{current}
[requirements]
test_step = "2 mm"
overshoot = {{ at_most = "10 %" }}
settling_time = {{ at_most = "5 s", band = "2 %" }}
[limits]
command = {{ lowest = "-10 V", highest = "10 V" }}
response = {{ lowest = "0 mm", highest = "100 mm" }}
"""
LOGGED = """
[[runs]]
file = "fit.csv"
use = "fit"
loop = "closed"
[[runs]]
file = "held_out.csv"
use = "held-out"
loop = "closed"
"""


def rig(folder: Path, runs: str = LOGGED, current: str = "") -> Path:
    """A rig file in a folder."""
    path = folder / "rig.toml"
    path.write_text(RIG.format(runs=runs, current=current), "utf-8")
    return path


def require_the_plant(fit) -> None:
    """Each parameter within its interval and a standard error of what made the log."""
    found = {each.name: each for each in fit.parameters}
    for name, truth in (("gain", GAIN), ("time constant", LAG), ("dead time", DEAD_TIME)):
        room = found[name].std_error
        assert found[name].low - room <= truth <= found[name].high + room, name


def test_gains_come_from_logs_of_a_closed_loop(tmp_path: Path) -> None:
    """Fitted and confirmed in closed loop, the command logged: released, with the plant that made the logs."""
    write(tmp_path / "fit.csv", run_loop(1))
    write(tmp_path / "held_out.csv", run_loop(2))
    outcome = deliver(rig(tmp_path), tmp_path / "out")
    assert outcome.reasons == ()
    assert outcome.fit.structure == "lag"
    require_the_plant(outcome.fit)
    assert outcome.fit.operating_response == pytest.approx(RESPONSE, abs=0.05)
    assert outcome.fit.operating_command == pytest.approx(COMMAND, abs=0.05)
    assert [compared.verdict for compared in outcome.closing] == ["agrees"]
    assert (tmp_path / "out" / "report.html").exists()


def test_a_held_out_loop_around_another_plant_disagrees(tmp_path: Path) -> None:
    """Half as much gain again in the rig, seen in closed loop."""
    write(tmp_path / "fit.csv", run_loop(1))
    write(tmp_path / "held_out.csv", run_loop(2, gain=1.5 * GAIN))
    outcome = process_rig(rig(tmp_path))
    assert outcome.status == "held"
    assert [compared.verdict for compared in outcome.closing] == ["disagrees"]


def test_a_loop_that_nothing_excites_is_refused(tmp_path: Path) -> None:
    """The setpoint stands still, so that noise alone moves the loop: what, where, found and what to do."""
    write(tmp_path / "fit.csv", run_loop(1, size=0.0))
    write(tmp_path / "held_out.csv", run_loop(2))
    with pytest.raises(RecordError, match=r"closed loop without excitation[\s\S]*50 mm[\s\S]*move the setpoint"):
        process_rig(rig(tmp_path))


def test_steps_added_to_the_command_excite_a_loop_at_rest(tmp_path: Path) -> None:
    """A dither of 1 V on a constant setpoint tells the plant: its response is right to 4 % up to 2 rad/s."""
    write(tmp_path / "fit.csv", run_loop(1, size=0.0, dither=1.0))
    loaded = load_rig(rig(tmp_path, LOGGED.split("[[runs]]\nfile = \"held")[0]))
    record = read_record(loaded.runs[0], loaded)
    assert all(finding.refuses == "no" for finding in record.findings)
    frequency = np.array([0.1, 0.5, 1.0, 2.0])
    true = Plant((GAIN,), (LAG, 1.0), DEAD_TIME).response_at(frequency)
    found = identify([record.run]).plant.response_at(frequency)
    assert np.max(np.abs(found / true - 1.0)) < 0.04


def test_a_held_out_loop_without_excitation_confirms_nothing(tmp_path: Path) -> None:
    """It is read, and holds the job."""
    write(tmp_path / "fit.csv", run_loop(1))
    write(tmp_path / "held_out.csv", run_loop(2, size=0.0))
    loaded = load_rig(rig(tmp_path))
    found = {finding.kind: finding.refuses for finding in read_record(loaded.runs[1], loaded).findings}
    assert found["closed loop without excitation"] == "holds"
