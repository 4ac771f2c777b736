"""The whole job on small invented rigs: what is released, what is held and why, what is refused."""

import json
import shutil
from pathlib import Path

import h5py
import jsonschema
import numpy as np
import pytest
from gainwright.ident.errors import RecordError, RequestError
from gainwright.io.commands.main import main
from gainwright.io.deliver import deliver
from gainwright.io.job import process_rig

SCHEMA = json.loads((Path(__file__).parent / "gain_sheet.schema.json").read_text("utf-8"))
RIG = """
[rig]
name = "invented"
[signals]
time = {{ source = "t", unit = "s" }}
command = {{ source = "u", unit = "V" }}
response = {{ source = "y", unit = "mm", range = {{ lowest = "0 mm", highest = "{top} mm" }} }}
[[runs]]
file = "fit.csv"
use = "fit"
excitation = "step"
{held_out}
[controller]
update_interval = "50 ms"
computation_delay = "5 ms"
structures = ["PI"]
[requirements]
test_step = "{step} mm"
overshoot = {{ at_most = "15 %" }}
settling_time = {{ at_most = "{settling}", band = "5 %" }}
[limits]
{limits}
"""
HELD_OUT = '[[runs]]\nfile = "held_out.csv"\nuse = "held-out"\nexcitation = "step"'
LIMITS = 'command = { lowest = "-10 V", highest = "10 V" }\nresponse = { lowest = "0 mm", highest = "100 mm" }'
GAIN, LAG, DEAD_TIME = 2.0, 1.0, 0.2


def log(path: Path, seed: int, gain: float = GAIN, top: float = 100.0, moves: bool = True, alive: bool = True) -> None:
    """30 s at 20 Hz of a lag with dead time, in closed form: each step adds gain (1 - exp(-(t - start)/T))."""
    random = np.random.default_rng(seed)
    time = np.arange(600) * 0.05
    starts, sizes = [2.0, 9.0, 16.0, 23.0], ([2.0, -3.0, 2.5, -1.5] if seed % 2 else [-1.5, 2.5, -3.0, 2.0])
    command, response = np.full(time.size, 3.0), np.full(time.size, 50.0)
    for start, size in zip(starts, sizes, strict=True):
        command += size * moves * (time >= start)
        response += gain * size * moves * (1.0 - np.exp(-np.clip(time - start - DEAD_TIME, 0.0, None) / LAG))
    response = np.minimum(response * alive + random.normal(0.0, 0.03, time.size) * alive, top)
    rows = [f"{t:.3f},{u:.3f},{y:.5f}" for t, u, y in zip(time, command, response, strict=True)]
    path.write_text("t,u,y\n" + "\n".join(rows) + "\n", "utf-8")


def rig(folder: Path, **changes: str) -> Path:
    """A rig file in a folder with its two logs."""
    words = {"held_out": HELD_OUT, "limits": LIMITS, "step": "2", "settling": "5 s", "top": "100"} | changes
    if not (folder / "fit.csv").exists():
        log(folder / "fit.csv", 1)
    if not (folder / "held_out.csv").exists():
        log(folder / "held_out.csv", 2)
    path = folder / "rig.toml"
    path.write_text(RIG.format(**words), "utf-8")
    return path


def held_because(outcome) -> str:
    """All reasons in one text; there is at least one."""
    assert outcome.status == "held"
    return "\n".join(outcome.reasons)


def refusal_or_reasons(path: Path) -> str:
    """Why the job gives no released gains, whether it is refused or held."""
    try:
        outcome = process_rig(path)
    except RecordError as refused:
        return refused.text
    return held_because(outcome)


@pytest.fixture(scope="module")
def good(tmp_path_factory: pytest.TempPathFactory):
    """A job in which everything is as it should be, with its results on disk."""
    folder = tmp_path_factory.mktemp("good")
    path = rig(folder)
    before = {name: (folder / name).read_bytes() for name in ("fit.csv", "held_out.csv", "rig.toml")}
    outcome = deliver(path, folder / "out")
    assert {name: (folder / name).read_bytes() for name in before} == before
    return outcome, folder / "out"


def test_a_good_job_is_released(good) -> None:
    """One lag, little noise, a fresh run of the same plant, mild requirements."""
    outcome, _ = good
    assert outcome.reasons == ()
    assert outcome.status == "released"


def test_a_good_job_finds_the_plant_that_made_the_logs(good) -> None:
    """Within the interval that it states; the record was made in closed form from these three numbers."""
    outcome, _ = good
    found = {each.name: each for each in outcome.fit.parameters}
    for name, truth in (("gain", GAIN), ("time constant", LAG), ("dead time", DEAD_TIME)):
        assert found[name].low - found[name].std_error <= truth <= found[name].high + found[name].std_error, name


def test_the_sheet_on_disk_keeps_every_promise(good) -> None:
    """Schema, status, an integrating law whose command coefficients sum to zero exactly, and at most 0.01 deg."""
    sheet = json.loads((good[1] / "gains.json").read_text("utf-8"))
    jsonschema.validate(sheet, SCHEMA)
    assert sheet["status"] == "released"
    equation = sheet["controller"]["difference_equation"]
    assert sum(equation["command"]) == 0.0
    assert equation["update_interval"] == 0.05
    assert sheet["checked"]["plausible_plants"] >= 1000
    assert [run["use"] for run in sheet["provenance"]["runs"]] == ["fit", "held-out"]


def test_the_loop_gain_of_a_pi_controller_is_its_proportional_gain(good) -> None:
    """The compensator is K (s + z)/s, so K = P; the sign of the plant is positive here."""
    sheet = json.loads((good[1] / "gains.json").read_text("utf-8"))
    proportional = sheet["controller"]["forms"]["parallel"]["proportional"]["value"]
    assert sheet["selection"]["loop_gain"] == pytest.approx(proportional, rel=1e-9)


def test_the_three_results_stand_beside_each_other(good) -> None:
    """Sheet, dossier and report, and nothing else."""
    assert sorted(path.name for path in good[1].iterdir()) == ["dossier.h5", "gains.json", "report.html"]
    with h5py.File(good[1] / "dossier.h5", "r") as dossier:
        assert dossier["plausible/dead_time"].shape[0] >= 1000
        assert dossier.attrs["status"] == "released"


def test_the_same_job_twice_gives_the_same_gains(good, tmp_path: Path) -> None:
    """Every draw has its seed; only the time of creation and the folder differ."""
    for name in ("fit.csv", "held_out.csv"):
        shutil.copy(good[1].parent / name, tmp_path / name)
    again = process_rig(rig(tmp_path))
    assert again.design.gains == good[0].design.gains
    assert again.design.law == good[0].design.law


def test_without_a_held_out_run_the_job_is_held_with_code_3(tmp_path: Path, capsys) -> None:
    """The gains stand under candidate, the verdict is on the output stream, and the report was not asked for."""
    assert main(["process", str(rig(tmp_path, held_out="")), "--no-report"]) == 3
    assert sorted(path.name for path in (tmp_path / "out").iterdir()) == ["dossier.h5", "gains.json"]
    assert "no held-out run" in " ".join(capsys.readouterr().out.split())
    sheet = json.loads((tmp_path / "out" / "gains.json").read_text("utf-8"))
    jsonschema.validate(sheet, SCHEMA)
    assert sheet["controller"] is None
    assert sheet["candidate"]["controller"]["structure"] == "PI"
    assert any("no held-out run" in reason for reason in sheet["reasons"])


def test_a_held_out_run_copied_from_a_fit_run_is_held_and_so_are_limits_that_were_not_given(tmp_path: Path) -> None:
    """The copy has another name and the same samples; all that is wrong is said at once."""
    log(tmp_path / "fit.csv", 1)
    shutil.copy(tmp_path / "fit.csv", tmp_path / "held_out.csv")
    text = held_because(process_rig(rig(tmp_path, limits="")))
    assert "held_out.csv holds samples that were fitted as fit.csv" in text
    assert "[limits] command has no lowest and no highest" in text
    assert "[limits] response has no lowest and no highest" in text


def test_a_held_out_run_taken_after_the_gain_changed_is_held(tmp_path: Path) -> None:
    """Half as much gain again: another plant."""
    log(tmp_path / "held_out.csv", 2, gain=1.5 * GAIN)
    assert "disagrees" in held_because(process_rig(rig(tmp_path)))


def test_settling_asked_faster_than_the_dead_time_is_held(tmp_path: Path) -> None:
    """Nothing can settle in 0.1 s behind a dead time of 0.2 s."""
    assert "settling" in held_because(process_rig(rig(tmp_path, settling="100 ms")))


def test_limits_too_tight_for_the_test_step_hold(tmp_path: Path) -> None:
    """A step of 20 mm from about 50 mm can't stay below 60 mm."""
    tight = LIMITS.replace("100 mm", "60 mm")
    assert "response highest" in held_because(process_rig(rig(tmp_path, limits=tight, step="20")))


def test_a_dead_response_is_refused_and_never_released(tmp_path: Path) -> None:
    """The log can't be used, whatever the command did."""
    log(tmp_path / "fit.csv", 1, alive=False)
    with pytest.raises(RecordError):
        process_rig(rig(tmp_path))


def test_a_command_that_never_moves_is_refused(tmp_path: Path) -> None:
    """Nothing can be learnt from it."""
    log(tmp_path / "fit.csv", 1, moves=False)
    with pytest.raises(RecordError):
        process_rig(rig(tmp_path))


def test_a_clipped_sensor_is_not_released(tmp_path: Path) -> None:
    """The response sits at the end of the sensor's range for a visible part of the record."""
    log(tmp_path / "fit.csv", 1, top=53.0)
    assert "clip" in refusal_or_reasons(rig(tmp_path, top="53")).lower()


def test_a_rig_file_that_is_wrong_is_a_request_error_and_leaves_no_sheet(tmp_path: Path) -> None:
    """The earlier sheet is set aside although nothing was computed."""
    path = rig(tmp_path, settling="5 parsecs")
    (tmp_path / "out").mkdir()
    (tmp_path / "out" / "gains.json").write_text("{}")
    with pytest.raises(RequestError, match="parsecs"):
        deliver(path, tmp_path / "out")
    assert [each.name for each in (tmp_path / "out").iterdir()] == ["gains.superseded.json"]


def test_a_fault_of_the_program_is_never_turned_into_a_held_sheet(tmp_path: Path, monkeypatch) -> None:
    """Division by zero inside a stage goes through, and nothing is written."""
    monkeypatch.setattr("gainwright.io.job.begin_design", lambda *_, **__: 1 / 0)
    with pytest.raises(ZeroDivisionError):
        deliver(rig(tmp_path), tmp_path / "out")
    assert not (tmp_path / "out").exists()
