"""Frequency tables through the whole job: read, fitted, held out, reported; what they can't tell holds it."""

import json
from pathlib import Path

import h5py
import mpmath
import numpy as np
import pytest
from gainwright.ident.errors import GainwrightError, RecordError, RequestError
from gainwright.io.deliver import deliver
from gainwright.io.job import process_rig
from gainwright.io.read_table import read_table
from gainwright.io.rechecking import recheck_sheet
from gainwright.io.rigfile.load import load_rig

GAIN, LAG, DEAD_TIME = 2.0, 1.0, 0.2
HERTZ = np.geomspace(0.01, 2.0, 24)
RIG = """
[rig]
name = "an invented rig, measured by its frequency response"
[operating_point]
command = "3 V"
response = "50 mm"
[signals]
command = { unit = "V" }
response = { unit = "mm" }
RUNS
[controller]
update_interval = "50 ms"
structures = ["PI"]
[requirements]
test_step = "2 mm"
overshoot = { at_most = "10 %" }
settling_time = { at_most = "6 s", band = "2 %" }
[limits]
command = { lowest = "-10 V", highest = "10 V" }
response = { lowest = "0 mm", highest = "100 mm" }
"""
COLUMNS = """
frequency = { source = "f", unit = "Hz" }
magnitude = { source = "size", unit = "dB" }
phase = { source = "phase", unit = "deg" }
magnitude_error = { source = "of_size", unit = "dB" }
phase_error = { source = "of_phase", unit = "deg" }
"""
TABLE = '[[runs]]\nfile = "NAME.csv"\nuse = "USE"\nexcitation = "frequency-table"\n' + COLUMNS


def table(name: str, use: str) -> str:
    """One [[runs]] table."""
    return TABLE.replace("NAME", name).replace("USE", use)


TWO = table("fit", "fit") + table("held_out", "held-out")


def write(path: Path, seed: int, gain: float = GAIN, error: float = 0.01, hertz: np.ndarray = HERTZ) -> None:
    """gain exp(-0.2 s)/(s + 1) by mpmath at s = 2 pi j f, relative noise of `error`; dB and degrees."""
    random = np.random.default_rng(seed)
    s = [2 * mpmath.pi * mpmath.mpc(0, float(f)) for f in hertz]
    exact = np.array([complex(gain * mpmath.exp(-DEAD_TIME * w) / (LAG * w + 1)) for w in s])
    noisy = exact * (1 + error * (random.standard_normal(len(s)) + 1j * random.standard_normal(len(s))))
    columns = [hertz, 20 * np.log10(np.abs(noisy)), np.degrees(np.unwrap(np.angle(noisy))),
               np.full(len(s), 20 / np.log(10) * error), np.full(len(s), np.degrees(error)),
               np.full(len(s), 0.99)]  # fmt: skip
    names = "f,size,phase,of_size,of_phase,seen"
    np.savetxt(path, np.column_stack(columns), fmt="%.8g", delimiter=",", header=names, comments="", encoding="utf-8")


def rig(folder: Path, runs: str = TWO, *changes: tuple[str, str]) -> Path:
    """A rig file with these runs, some of its text exchanged."""
    text = RIG.replace("RUNS", runs)
    for old, new in changes:
        assert old in text
        text = text.replace(old, new, 1)
    path = folder / "rig.toml"
    path.write_text(text, "utf-8")
    return path


def step_log(path: Path, seed: int, gain: float = GAIN) -> None:
    """40 s at 20 Hz: steps of 1.5 V and back, in closed form, noise of 0.03 mm."""
    time = np.arange(0.0, 40.0, 0.05)
    command, response = np.full(time.size, 3.0), np.full(time.size, 50.0)
    for start, size in ((2.0, 1.5), (14.0, -2.5), (27.0, 1.0)):
        command += size * (time >= start)
        response += gain * size * (1 - np.exp(-np.clip(time - start - DEAD_TIME, 0.0, None) / LAG))
    response += np.random.default_rng(seed).normal(0.0, 0.03, time.size)
    rows = np.column_stack([time, command, response])
    np.savetxt(path, rows, fmt="%.6g", delimiter=",", header="t,u,y", comments="", encoding="utf-8")


TIMED = (
    ("command = { unit", 'time = { source = "t", unit = "s" }\ncommand = { source = "u", unit'),
    ("response = { unit", 'response = { source = "y", unit'),
)
HELD_OUT_LOG = '[[runs]]\nfile = "steps.csv"\nuse = "held-out"\n'


def test_gains_come_from_one_table_and_are_confirmed_by_another(tmp_path: Path) -> None:
    """Released, with the plant that made the tables; sheet, dossier and report hold both."""
    write(tmp_path / "fit.csv", 1)
    write(tmp_path / "held_out.csv", 2)
    outcome = deliver(rig(tmp_path), tmp_path / "out")
    assert outcome.reasons == ()
    values = {parameter.name: parameter for parameter in outcome.fit.parameters}
    for name, true in (("gain", GAIN), ("time constant", LAG), ("dead time", DEAD_TIME)):
        assert abs(values[name].value - true) < 4 * values[name].std_error, name
    (compared,) = outcome.closing
    assert compared.verdict == "agrees"
    assert compared.misfit == pytest.approx(0.01 * np.sqrt(2), rel=0.5)
    assert compared.coverage_95 > 0.8
    sheet = json.loads((tmp_path / "out" / "gains.json").read_text("utf-8"))
    assert sheet["closing"][0]["file"] == "held_out.csv"
    assert [run["use"] for run in sheet["provenance"]["runs"]] == ["fit", "held-out"]
    with h5py.File(tmp_path / "out" / "dossier.h5") as file:
        assert file["tables/0/frequency"][0] == pytest.approx(2 * np.pi * 0.01, rel=1e-6)
        assert file["fit/tables/0/model_magnitude"].shape == (24,)
        assert file["closing/0/table/phase_error"][0] == pytest.approx(0.01, rel=1e-3)
    page = (tmp_path / "out" / "report.html").read_text("utf-8")
    assert "measured response of the rig at single frequencies" in page
    assert "24 frequencies" in page
    assert "noise of the response is not known: no log in time tells it" in page


def test_a_held_out_table_of_another_plant_disagrees(tmp_path: Path) -> None:
    """Half as much gain again."""
    write(tmp_path / "fit.csv", 1)
    write(tmp_path / "held_out.csv", 2, gain=1.5 * GAIN)
    outcome = process_rig(rig(tmp_path))
    assert outcome.status == "held"
    assert outcome.closing[0].verdict == "disagrees"


def test_a_table_is_confirmed_by_a_run_in_time_that_tells_the_operating_point(tmp_path: Path) -> None:
    """No operating point is stated: it and the noise come from the held-out steps."""
    write(tmp_path / "fit.csv", 1)
    step_log(tmp_path / "steps.csv", 3)
    point = ('[operating_point]\ncommand = "3 V"\nresponse = "50 mm"\n', "")
    outcome = process_rig(rig(tmp_path, table("fit", "fit") + HELD_OUT_LOG, *TIMED, point))
    assert outcome.reasons == ()
    assert outcome.fit.operating_response == pytest.approx(50.0, abs=0.05)
    assert outcome.fit.noise.std == pytest.approx(0.03, rel=0.15)
    assert [compared.verdict for compared in outcome.closing] == ["agrees"]
    assert "from the fitted plant's" in outcome.closing[0].why


def test_a_table_that_does_not_reach_the_loop_confirms_nothing(tmp_path: Path) -> None:
    """Frequencies a tenth of those at which the loop works: not comparable, with both."""
    write(tmp_path / "fit.csv", 1)
    write(tmp_path / "held_out.csv", 2, hertz=np.geomspace(0.001, 0.02, 12))
    outcome = process_rig(rig(tmp_path))
    assert outcome.status == "held"
    assert (outcome.closing[0].verdict, "rad/s" in outcome.closing[0].why) == ("not comparable", True)


def test_magnitudes_alone_hold_the_job_and_say_what_is_missing(tmp_path: Path) -> None:
    """Sign and dead time are nowhere in them."""
    write(tmp_path / "fit.csv", 1)
    write(tmp_path / "held_out.csv", 2)
    bare = table("fit", "fit").replace('phase = { source = "phase", unit = "deg" }\n', "")
    outcome = process_rig(rig(tmp_path, bare + table("held_out", "held-out")))
    assert outcome.status == "held"
    assert any("sign of the gain, dead time" in reason for reason in outcome.reasons)


def one(folder: Path, *changes: tuple[str, str]):
    """The table of `fit.csv` as the rig file has it read."""
    loaded = load_rig(rig(folder, table("fit", "fit"), *changes))
    return read_table(loaded.runs[0], loaded)


def test_units_of_a_table_are_converted(tmp_path: Path) -> None:
    """Hz by 2 pi, dB by 20 log10, degrees; the same table in rad/s, mm/V and rad gives the same points."""
    write(tmp_path / "fit.csv", 1)
    read = one(tmp_path).table
    rows = np.loadtxt(tmp_path / "fit.csv", delimiter=",", skiprows=1)
    plain = np.column_stack(
        [2 * np.pi * rows[:, 0], 100 * 10 ** (rows[:, 1] / 20), np.radians(rows[:, 2]), rows[:, 3:]]
    )
    np.savetxt(tmp_path / "fit.csv", plain[::-1], fmt="%.9g", delimiter=",", header="f,size,phase,of_size,of_phase,x",
               comments="")  # fmt: skip
    other = one(
        tmp_path, ('unit = "Hz"', 'unit = "rad/s"'), ('"size", unit = "dB"', '"size", unit = "cm/kV"'),
        ('"phase", unit = "deg"', '"phase", unit = "rad"'),
    ).table  # fmt: skip
    for name in ("frequency", "magnitude", "phase", "magnitude_error", "phase_error"):
        np.testing.assert_allclose(getattr(other, name), getattr(read, name), rtol=1e-6)
    assert read.magnitude[0] == pytest.approx(GAIN, rel=0.05)
    assert read.magnitude_error[0] / read.magnitude[0] == pytest.approx(0.01, rel=1e-6)  # 20/ln 10 dB a unit


WRONG = {
    "unknown column": ('source = "size"', 'source = "sise"', RequestError, r"not in the log|did you mean"),
    "frequency in s": ('unit = "Hz"', 'unit = "s"', RequestError, r'not a unit of frequency[\s\S]*"Hz"'),
    "magnitude in V": ('"size", unit = "dB"', '"size", unit = "V"', RequestError, r"wrong kind of unit for the mag"),
    "size below zero": ('"size", unit = "dB"', '"size", unit = "mm/V"', RecordError, r"magnitude of the table"),
    "no frequency": ('frequency = { source = "f", unit = "Hz" }\n', "", RequestError, r"runs\[1\].frequency: this key"),
    "a window": ('use = "fit"', 'use = "fit"\nfrom = "1 s"', RequestError, r"runs\[1\].from: a frequency table has no"),
    "closed loop": ('use = "fit"', 'use = "fit"\nloop = "closed"', RequestError, r"runs\[1\].loop[\s\S]*feedback"),
    "a log in time": ('excitation = "frequency-table"', 'excitation = "sweep"', RequestError, r"signals.time"),
    "no operating point": ('command = "3 V"\n', "", RequestError, r"operating_point.command: a frequency table does"),
}


@pytest.mark.parametrize("case", WRONG)
def test_a_wrong_table_is_refused_with_its_key(case: str, tmp_path: Path) -> None:
    """Each case says what is wrong, where, and what would be right."""
    write(tmp_path / "fit.csv", 1)
    old, new, kind, message = WRONG[case]
    with pytest.raises(GainwrightError, match=message) as caught:
        one(tmp_path, (old, new))
    assert isinstance(caught.value, kind)


def test_lost_and_unsure_points_are_left_out_and_said(tmp_path: Path) -> None:
    """One cell without a number, three points whose error is as large as they are."""
    write(tmp_path / "fit.csv", 1)
    lines = (tmp_path / "fit.csv").read_text("utf-8").splitlines()
    lines[5] = ",".join(["" if i == 1 else cell for i, cell in enumerate(lines[5].split(","))])
    for place in (8, 9, 10):
        cells = lines[place].split(",")
        lines[place] = ",".join([*cells[:3], "9.0", *cells[4:]])
    (tmp_path / "fit.csv").write_text("\n".join(lines) + "\n", "utf-8")
    read = one(tmp_path)
    assert len(read.table.frequency) == 20
    assert {finding.kind: finding.size for finding in read.findings if "points" in finding.kind} == {
        "lost points": "1 of 24 points",
        "unsure points": "3 of 23 points",
    }


def test_a_phase_that_rises_is_asked_about(tmp_path: Path) -> None:
    """A lag written as positive: the job is held, with the scale that turns it round."""
    write(tmp_path / "fit.csv", 1)
    read = one(tmp_path, ('"phase", unit = "deg"', '"phase", unit = "deg", scale = -1.0'))
    assert {finding.kind: finding.refuses for finding in read.findings}["phase rises"] == "holds"


def test_a_fresh_table_is_held_against_an_earlier_sheet(tmp_path: Path) -> None:
    """Listed as a table in a rig file: valid for the same rig, not for half as much gain again."""
    for name, seed, gain in (("fit", 1, GAIN), ("held_out", 2, GAIN), ("again", 3, GAIN), ("other", 4, 1.5 * GAIN)):
        write(tmp_path / f"{name}.csv", seed, gain)
    deliver(rig(tmp_path), tmp_path / "out")
    listed = rig(tmp_path, TWO + table("again", "held-out") + table("other", "held-out"))
    verdicts = [
        recheck_sheet(tmp_path / "out" / "gains.json", [tmp_path / f"{name}.csv"], listed).verdict
        for name in ("again", "other")
    ]
    assert verdicts == ["valid", "no longer valid"]
