"""Fit and held-out runs that were taken in closed loop, through the whole job."""

from pathlib import Path

import numpy as np
import pytest
from gainwright.ident.errors import RecordError, RequestError
from gainwright.ident.identify import identify
from gainwright.ident.plant import Plant
from gainwright.io.deliver import deliver
from gainwright.io.job import process_rig
from gainwright.io.read_record import read_record
from gainwright.io.record import Record
from gainwright.io.rigfile.load import load_rig

from .known_loop import COMMAND, DEAD_TIME, GAIN, INTERVAL, LAG, RESPONSE, Made, run_loop, write

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

NOT_LOGGED = """
[[runs]]
file = "fit.csv"
use = "fit"
loop = "closed"
before = { command = "3 V" }
signals = { command = false }
current = { proportional = "0.8 V/mm", integral = "0.6 V/(mm s)" }
[[runs]]
file = "held_out.csv"
use = "held-out"
loop = "closed"
before = { command = "3 V" }
signals = { command = false }
current = { proportional = "800 V/m", integral = "0.6 V/(mm s)", update_interval = "50 ms" }
"""


def rig(folder: Path, runs: str = LOGGED, current: str = "") -> Path:
    """A rig file in a folder."""
    path = folder / "rig.toml"
    path.write_text(RIG.format(runs=runs, current=current), "utf-8")
    return path


def require_the_plant(fit, dead_time: float = DEAD_TIME) -> None:
    """Each parameter within its interval and a standard error of what made the log."""
    found = {each.name: each for each in fit.parameters}
    for name, truth in (("gain", GAIN), ("time constant", LAG), ("dead time", dead_time)):
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


def test_a_held_out_loop_with_known_gains_is_run_from_its_setpoint(tmp_path: Path) -> None:
    """Command logged and gains stated: the sheet says so, and the noise-free loop is what was foretold, to 3 %."""
    write(tmp_path / "fit.csv", run_loop(1))
    write(tmp_path / "held_out.csv", run_loop(2))
    gains = 'current = { proportional = "0.8 V/mm", integral = "0.6 V/(mm s)" }'
    (compared,) = process_rig(rig(tmp_path, current=gains)).closing
    assert compared.verdict == "agrees"
    assert "free run of the loop with the gains in force then" in compared.why
    quiet = run_loop(2, noise=0.0).response
    assert np.sqrt(np.mean((compared.predicted - quiet) ** 2)) < 0.03 * np.std(quiet)
    assert compared.coverage_95 > 0.9


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


def test_gains_come_from_setpoint_and_response_alone(tmp_path: Path) -> None:
    """The command not logged, the gains known: the plant inside the known loop, released.

    The controller takes one interval to compute, which is no dead time of the rig: 0.2 s in all are 0.15 s of the rig.
    """
    for name, seed in (("fit.csv", 1), ("held_out.csv", 2)):
        write(tmp_path / name, run_loop(seed), "try")
    path = rig(tmp_path, NOT_LOGGED)
    path.write_text(path.read_text("utf-8").replace("[requirements]", 'computation_delay = "50 ms"\n[requirements]'))
    outcome = deliver(path, tmp_path / "out", with_report=False)
    assert outcome.reasons == ()
    require_the_plant(outcome.fit, dead_time=0.15)
    assert outcome.fit.operating_command == pytest.approx(COMMAND, abs=0.05)
    assert any("command not logged" in caution for caution in outcome.cautions)


def worked_out(folder: Path, made: Made, runs: str = NOT_LOGGED, every: int = 1) -> Record:
    """The fit run of a log without its command."""
    for name in ("fit.csv", "held_out.csv"):
        write(folder / name, made, "try", every)
    loaded = load_rig(rig(folder, runs))
    return read_record(loaded.runs[0], loaded)


def test_the_command_worked_out_is_the_one_that_was_sent(tmp_path: Path) -> None:
    """Against the loop that made the log, to the digits of the log (9) summed up by the integral."""
    made = run_loop(3)
    assert np.max(np.abs(worked_out(tmp_path, made).run.command - made.command)) < 1e-5


def test_a_log_faster_than_the_controller_is_read_at_the_controllers_samples(tmp_path: Path) -> None:
    """Twice as fast, the setpoint moving at odd samples: the command is held from those, to the digits of the log."""
    made = run_loop(3)
    time = 0.5 * INTERVAL * np.arange(2 * made.time.size)
    late = [np.concatenate([values[:1], np.repeat(values, 2)[:-1]]) for values in (made.setpoint, made.command)]
    response = np.interp(time, made.time + 0.5 * INTERVAL, made.response)
    record = worked_out(tmp_path, Made(time, *late, response))
    assert np.max(np.abs(record.run.command - late[1])[1:]) < 1e-5


def test_a_log_slower_than_the_controller_can_not_tell_the_command(tmp_path: Path) -> None:
    """Every third sample of the controller: refused, with both intervals."""
    with pytest.raises(RecordError, match=r"can't be worked out[\s\S]*0\.15 s[\s\S]*0\.05 s[\s\S]*log the command"):
        worked_out(tmp_path, run_loop(3), every=3)


def test_a_worked_out_command_beyond_its_limits_holds(tmp_path: Path) -> None:
    """Steps of 20 mm ask for 16 V and more where 10 V are allowed: the controller must have been clamped."""
    record = worked_out(tmp_path, run_loop(3, size=20.0))
    assert {f.kind: f.refuses for f in record.findings}["worked-out command beyond its limits"] == "holds"


MISSING = {
    "open loop": ('loop = "closed"\n', "", r"runs\[1\].loop: a log without its command must be of a closed loop"),
    "no gains": ('current = { proportional = "0.8 V/mm", integral = "0.6 V/(mm s)" }\n', "", r"needs the gains"),
    "no start": ('before = { command = "3 V" }\n', "", r"runs\[1\].before: a log without its command"),
    "no setpoint": ("{ command = false }", "{ command = false, setpoint = false }", r"needs its setpoint"),
    "empty gains": ('{ proportional = "0.8 V/mm", integral = "0.6 V/(mm s)" }', "{}", r"no gain is stated"),
}


@pytest.mark.parametrize("case", MISSING)
def test_a_log_without_its_command_needs_all_of_the_loop(case: str, tmp_path: Path) -> None:
    """Each missing part is named under its key."""
    old, new, message = MISSING[case]
    with pytest.raises(RequestError, match=message):
        worked_out(tmp_path, run_loop(3, seconds=10.0), NOT_LOGGED.replace(old, new, 1))
