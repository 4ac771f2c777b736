"""The paddle with a heavier plate: what retune says of it, through the command."""

import json
from pathlib import Path
from shutil import copytree

import pytest
from gainwright.io.commands.main import main

SAMPLES = Path(__file__).resolve().parents[2] / "sample_runs"


@pytest.fixture(scope="module")
def both(tmp_path_factory) -> tuple[dict, dict, str]:
    """Sheets before and after, and the report after."""
    base = tmp_path_factory.mktemp("retune")
    for name in ("paddle", "paddle_heavier"):
        copytree(SAMPLES / name, base / name, ignore=lambda *_: ["out"])
    assert main(["process", str(base / "paddle" / "rig.toml"), "--no-report"]) == 0
    before = base / "paddle" / "out" / "gains.json"
    assert main(["retune", str(base / "paddle_heavier" / "rig.toml"), "--before", str(before)]) == 0
    after = base / "paddle_heavier" / "out"
    sheets = (json.loads(before.read_text("utf-8")), json.loads((after / "gains.json").read_text("utf-8")))
    return (*sheets, (after / "report.html").read_text("utf-8"))


def test_the_heavier_plate_is_seen_in_the_time_constant_alone(both) -> None:
    """True lags 0.08 s and 0.128 s (sample_rigs.py; the drive's own lags of a few ms add to both); the gain stayed."""
    change = both[1]["change"]
    rows = {row["name"]: row for row in change["parameters"]}
    assert change["changed"]
    assert change["p_value"] < 0.01
    low, high = rows["time constant"]["interval_95"]
    assert rows["time constant"]["changed"]
    assert low < 0.048 < high
    assert not rows["gain"]["changed"]


def test_the_old_gains_are_replaced_and_the_new_ones_are_gentler(both) -> None:
    """With the same gain the slower drive overshoots: the verdict names it."""
    before, after, _ = both
    old = after["change"]["old_gains"]
    assert old["verdict"] == "replace"
    assert old["share_meeting"] < 0.5
    assert {row["name"] for row in old["requirements"]} >= {"overshoot", "settling_time"}
    gains = [sheet["controller"]["forms"]["parallel"]["proportional"]["value"] for sheet in (before, after)]
    assert gains[1] < gains[0]
    assert after["ladder"][-1]["forms"] == after["controller"]["forms"]


def test_the_trail_leads_back_to_the_sheet_that_is_replaced(both) -> None:
    """Its file, its hash, when it was made, and that it was released."""
    before, after, _ = both
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
