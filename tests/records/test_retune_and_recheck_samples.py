"""The paddle with a heavier plate: what retune and recheck say of it, through the commands."""

import json
import os
from dataclasses import replace
from pathlib import Path
from shutil import copytree

import numpy as np
import pytest
import sample_rigs
from gainwright.io.commands.main import main
from true_rig import SheetController, closed_loop, open_loop

SAMPLES = Path(__file__).resolve().parents[2] / "sample_runs"


@pytest.fixture(scope="module")
def both(tmp_path_factory) -> tuple[dict, dict, str, Path]:
    """Sheets before and after, the report after, and the earlier sheet on disk."""
    base = tmp_path_factory.mktemp("retune")
    for name in ("paddle", "paddle_heavier"):
        copytree(SAMPLES / name, base / name, ignore=lambda *_: ["out"])
    assert main(["process", str(base / "paddle" / "rig.toml"), "--no-report"]) == 0
    before = base / "paddle" / "out" / "gains.json"
    assert main(["retune", str(base / "paddle_heavier" / "rig.toml"), "--before", str(before)]) == 0
    after = base / "paddle_heavier" / "out"
    sheets = (json.loads(before.read_text("utf-8")), json.loads((after / "gains.json").read_text("utf-8")))
    return (*sheets, (after / "report.html").read_text("utf-8"), before)


def test_the_heavier_plate_is_seen_in_the_time_constant_alone(both) -> None:
    """True lags 0.08 s and 0.16 s (sample_rigs.py; the drive's own lags of a few ms add to both); the gain stayed."""
    change = both[1]["change"]
    rows = {row["name"]: row for row in change["parameters"]}
    assert change["changed"]
    assert change["p_value"] < 0.01
    low, high = rows["time constant"]["interval_95"]
    assert rows["time constant"]["changed"]
    assert low < 0.08 < high
    assert not rows["gain"]["changed"]


def test_the_old_gains_are_replaced_and_the_new_ones_damp_the_slower_drive(both) -> None:
    """With the same gain the slower drive overshoots: the verdict names it, and derivative action comes in."""
    before, after, *_ = both
    old = after["change"]["old_gains"]
    assert old["verdict"] == "replace"
    assert old["share_meeting"] < 0.5
    rows = {row["name"]: row for row in old["requirements"]}
    assert set(rows) >= {"overshoot", "settling_time"}
    derivative = [sheet["controller"]["forms"]["parallel"]["derivative"]["value"] for sheet in (before, after)]
    assert abs(derivative[0]) < abs(derivative[1])
    new = {row["name"]: row for row in after["requirements"]}
    assert new["overshoot"]["predicted"] < new["overshoot"]["limit"] < rows["overshoot"]["predicted"]
    assert after["ladder"][-1]["forms"] == after["controller"]["forms"]


def test_the_trail_leads_back_to_the_sheet_that_is_replaced(both) -> None:
    """Its file, its hash, when it was made, and that it was released."""
    before, after, *_ = both
    trail = after["provenance"]["replaces"]
    assert trail["created"] == before["provenance"]["created"]
    assert trail["status"] == "released"
    assert len(trail["sha256"]) == 64


def test_the_report_shows_both_loci_in_one_picture(both) -> None:
    """With what changed, and the verdict on the old gains."""
    page = both[2]
    assert "Locus before and after the change, with the chosen poles" in page
    assert "What has changed since the earlier sheet" in page
    assert "REPLACE" in page


@pytest.fixture(scope="module")
def paddle_sheet(both) -> Path:
    """The paddle's sheet, with its dossier beside it."""
    return both[3]


def told(capsys, *arguments) -> tuple[int, dict]:
    """Exit code and answer of recheck."""
    code = main(["recheck", *(str(each) for each in arguments), "--json"])
    return code, json.loads(capsys.readouterr().out)


def test_the_sheet_is_still_valid_for_the_rig_that_it_was_made_for(paddle_sheet, capsys) -> None:
    """A run that was not fitted, read as the sheet's own rig file says."""
    code, answer = told(capsys, paddle_sheet, paddle_sheet.parents[1] / "held_out.csv")
    assert (code, answer["verdict"]) == (0, "valid")
    assert answer["notes"] == []


def test_the_sheet_is_no_longer_valid_after_the_heavier_plate(paddle_sheet, capsys) -> None:
    """Exit code 3, and the time constant is named."""
    code, answer = told(capsys, paddle_sheet, SAMPLES / "paddle_heavier" / "held_out.csv")
    assert (code, answer["verdict"]) == (3, "no longer valid")
    assert "time constant" in answer["runs"][0]["why"]


def test_a_sheet_alone_is_enough(paddle_sheet, tmp_path, capsys) -> None:
    """Without dossier and rig file: plants drawn from the covariance, columns as the sheet names them; both said."""
    alone = json.loads(paddle_sheet.read_text("utf-8"))
    alone["provenance"]["rig_file"]["file"] = str(tmp_path / "gone.toml")
    (tmp_path / "gains.json").write_text(json.dumps(alone), "utf-8")
    code, answer = told(capsys, tmp_path / "gains.json", SAMPLES / "paddle" / "held_out.csv")
    assert (code, answer["verdict"]) == (0, "valid")
    assert len(answer["notes"]) == 2


def test_runs_of_three_dates_tell_a_trend(paddle_sheet, tmp_path, capsys) -> None:
    """Runs a month apart, the last of the heavier plate: it decides, and each parameter has its line."""
    sources = [SAMPLES / "paddle" / name for name in ("doublets_1.csv", "doublets_2.csv")]
    sources.append(SAMPLES / "paddle_heavier" / "held_out.csv")
    files = []
    for month, source in enumerate(sources):
        files.append(tmp_path / f"run_{month}.csv")
        files[-1].write_bytes(source.read_bytes())
        os.utime(files[-1], (1.76e9 + 2.6e6 * month,) * 2)
    code, answer = told(capsys, paddle_sheet, *files)
    assert (code, answer["verdict"]) == (3, "no longer valid")
    assert {line["name"] for line in answer["trends"]} >= {"gain", "dead time", "time constant"}
    assert len({run["taken"] for run in answer["runs"]}) == 3
    assert "`taken`" in answer["notes"][0]


def rung_log(sheet: dict, number: int, folder: Path, plate: float, seconds: float) -> Path:
    """The true paddle under a rung's own law, setpoint stepped after half a second; nothing of gainwright in it."""
    rung = sheet["ladder"][number]
    rig = sample_rigs.paddle(np.random.default_rng(number), plate)
    rig = replace(rig, stages=tuple(s for s in rig.stages if type(s).__name__ != "Disturbed"))
    controller = SheetController.from_sheet({"controller": rung, "operating_point": sheet["operating_point"]})
    start, end = (rung["expected"][key]["value"] for key in ("setpoint_from", "setpoint_to"))
    start += rig.response_rest - sheet["operating_point"]["response"]["value"]
    end += rig.response_rest - sheet["operating_point"]["response"]["value"]

    def setpoint(t: float) -> float:
        return start if t < 0.5 else end

    log = closed_loop(rig, controller, setpoint, seconds, np.random.default_rng(number + 50), 0.001)
    rows = zip(log.time, log.command, log.reading, strict=True)
    lines = ["time_s,drive_V,position_mm,target_mm"]
    lines += [f"{t:.3f},{u:.4f},{y:.3f},{setpoint(t):.3f}" for t, u, y in rows]
    file = folder / f"rung_{number}_{plate}.csv"
    file.write_text("\n".join(lines) + "\n", "utf-8")
    return file


def test_a_rung_that_behaves_says_climb_and_one_that_is_cut_short_says_repeat(paddle_sheet, tmp_path, capsys) -> None:
    """On the true rig, its water still: the rung's own law under its own step."""
    sheet = json.loads(paddle_sheet.read_text("utf-8"))
    for number in (3, 5):
        log = rung_log(sheet, number, tmp_path, 1.0, 6.0)
        code, answer = told(capsys, paddle_sheet, log, "--rung", number, "--setpoint", "target_mm")
        assert (code, answer["advice"]) == (0, "climb"), answer
    short = rung_log(sheet, 4, tmp_path, 1.0, 0.8)
    code, answer = told(capsys, paddle_sheet, short, "--rung", 4, "--setpoint", "target_mm")
    assert (code, answer["advice"]) == (3, "repeat")


def test_a_rung_on_a_far_heavier_plate_does_not_say_climb(paddle_sheet, tmp_path, capsys) -> None:
    """Six times the mass rings at the target gains."""
    sheet = json.loads(paddle_sheet.read_text("utf-8"))
    log = rung_log(sheet, 5, tmp_path, 6.0, 6.0)
    code, answer = told(capsys, paddle_sheet, log, "--rung", 5, "--setpoint", "target_mm")
    assert code == 3
    assert answer["advice"] in ("stop", "repeat")


def test_a_rung_that_is_not_there_and_a_log_without_setpoint_are_refused(paddle_sheet, tmp_path, capsys) -> None:
    """Exit code 2, in words."""
    log = rung_log(json.loads(paddle_sheet.read_text("utf-8")), 1, tmp_path, 1.0, 1.0)
    assert main(["recheck", str(paddle_sheet), str(log), "--rung", "9"]) == 2
    assert "no such rung" in capsys.readouterr().err
    assert main(["recheck", str(paddle_sheet), str(log), "--rung", "1"]) == 2
    assert "--setpoint" in capsys.readouterr().err


def opening_log(sheet: dict, folder: Path, sign: float) -> Path:
    """The true paddle under rung 0's move of the command; a sign of -1 stands for a sensor wired the wrong way."""
    expected = sheet["ladder"][0]["expected"]
    rig = sample_rigs.paddle(np.random.default_rng(9))
    rig = replace(rig, stages=tuple(s for s in rig.stages if type(s).__name__ != "Disturbed"))
    rest = rig.command_rest
    size = expected["command_to"]["value"] - expected["command_from"]["value"]
    log = open_loop(rig, [(1.0, rest + size), (1.8, rest)], 2.5, 0.005, np.random.default_rng(10))
    lines = ["time_s,drive_V,position_mm"]
    lines += [f"{t:.3f},{u:.4f},{150.0 + sign * (y - 150.0):.3f}" for t, u, y in zip(log.time, log.command, log.reading,
                                                                                     strict=True)]  # fmt: skip
    file = folder / f"opening_{sign:g}.csv"
    file.write_text("\n".join(lines) + "\n", "utf-8")
    return file


def test_rung_0_says_climb_and_a_sensor_wired_the_wrong_way_says_stop(paddle_sheet, tmp_path, capsys) -> None:
    """The open-loop move on the true rig, its water still."""
    sheet = json.loads(paddle_sheet.read_text("utf-8"))
    code, answer = told(capsys, paddle_sheet, opening_log(sheet, tmp_path, 1.0), "--rung", 0)
    assert (code, answer["advice"]) == (0, "climb"), answer
    code, answer = told(capsys, paddle_sheet, opening_log(sheet, tmp_path, -1.0), "--rung", 0)
    assert (code, answer["advice"]) == (3, "stop")
    assert "wiring, sign or unit" in answer["runs"][0]["why"]
