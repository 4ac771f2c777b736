"""The ladder on the sheet: the promised keys on every rung, in the units of the rig, with safe words about aborting."""

import io
import json
from dataclasses import replace

import h5py
import pytest
from gainwright.design.ladder.build import build_ladder
from gainwright.design.ladder.rung import Ladder
from gainwright.io.dossier import dossier_bytes
from gainwright.io.release import reasons_to_hold
from gainwright.io.report.page import report_html
from gainwright.io.sheet import sheet_bytes, sheet_of

KEYS = {"rung", "forms", "expected", "abort", "lowest_gain_margin"}


@pytest.fixture
def climbed(made):
    """The made job with its ladder."""
    fit, rig = made.fit, made.rig
    ladder = build_ladder(
        made.design.gains,
        fit.plant,
        fit.plausible.take([0]),
        operating_command=fit.operating_command,
        operating_response=fit.operating_response,
        noise=fit.noise,
        requirements=rig.requirements,
        limits=rig.limits,
        setting=rig.setting,
    )
    return replace(made.outcome(), ladder=ladder)


def rows_of(outcome) -> list:
    """As another program reads them."""
    return json.loads(sheet_bytes(sheet_of(outcome)))["ladder"]


def test_every_rung_has_the_promised_keys_and_a_law_that_can_be_loaded(climbed) -> None:
    """Rung 0 has its loop open and no gains; the last is the target, with the very difference equation of the sheet."""
    sheet = json.loads(sheet_bytes(sheet_of(climbed)))
    rungs = sheet["ladder"]
    assert [rung["rung"] for rung in rungs] == list(range(6))
    assert all(set(rung) >= KEYS for rung in rungs)
    assert (rungs[0]["forms"], rungs[0]["loop"], rungs[0]["lowest_gain_margin"]) == (None, "open", None)
    assert rungs[-1]["forms"] == sheet["controller"]["forms"]
    assert rungs[-1]["difference_equation"]["update_interval"] == climbed.design.law.update_interval
    assert not any("no gain ladder" in caution for caution in sheet["cautions"])


def test_each_rung_says_when_to_stop_and_that_zero_command_may_not_be_safe(climbed) -> None:
    """A limit, the 99.9 % band for three response times, a growing oscillation, a frozen response; then safety."""
    for rung in rows_of(climbed)[1:]:
        abort, expected = rung["abort"], rung["expected"]
        assert abort["limits"]["response highest"] == {"value": 300.0, "unit": "mm"}
        assert abort["outside_band_99_9_for"]["value"] == pytest.approx(3.0 * expected["response_time"]["value"])
        assert abort["growing_oscillation"]["swings"] == 3
        assert abort["frozen_response"]["unit"] == "mm"
        assert "zero command is not safe for vertical loads, accumulators or heaters" in abort["then"]
    opening = rows_of(climbed)[0]
    assert opening["expected"]["direction"] in opening["abort"]["wrong_way"]
    assert "wiring, sign or unit" in opening["abort"]["because"]


def test_a_refused_ladder_holds_the_gains_in_capitals(made) -> None:
    """The reason stands in the sheet as it was said, and no rung does."""
    ladder = Ladder(None, (), "NO GAIN LADDER: LESS GAIN IS NOT SAFER", True)
    reasons = reasons_to_hold(made.rig, made.records, made.design, made.closing, (), ladder)
    assert reasons == ("NO GAIN LADDER: LESS GAIN IS NOT SAFER",)
    outcome = replace(made.outcome(reasons), ladder=ladder)
    assert rows_of(outcome) == []
    assert "NO GAIN LADDER: LESS GAIN IS NOT SAFER" in report_html(outcome)


def test_the_dossier_holds_every_rung(climbed) -> None:
    """Gains, margins and the whole band of each rung, all with units."""
    with h5py.File(io.BytesIO(dossier_bytes(climbed)), "r") as file:
        assert sorted(file["ladder"]) == ["0", "1", "2", "3", "4", "5"]
        for number, rung in enumerate(climbed.ladder.rungs, 1):
            group = file[f"ladder/{number}"]
            assert group["gains"][0] == rung.gains.proportional
            assert group["margins"][0] == rung.gain_margin
            assert group["expected/band/low"].shape == rung.expected.band.low.shape
            assert group["expected/band/low"].attrs["units"] == "mm"


def test_the_report_draws_the_ladder_and_tells_the_first_move(climbed) -> None:
    """A picture, rung 0 as an instruction, and each rung's gains."""
    page = report_html(climbed)
    assert "Gain ladder of 5 rungs above an open-loop move" in page
    assert "Rung 0, loop open" in page
    for rung in climbed.ladder.rungs:
        assert f"{rung.gains.proportional:g} V/mm" in page
