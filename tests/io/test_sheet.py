"""The gain sheet keeps its fixed names, holds finite numbers only, and hides held gains."""

import json
import math
from dataclasses import replace
from pathlib import Path

import jsonschema
import numpy as np
import pytest
from gainwright.design.requirements import Requirement
from gainwright.ident.fitted import Parameter
from gainwright.ident.plant import Plant
from gainwright.io.sheet import SheetError, refuse_numbers_that_are_none, sheet_bytes, sheet_of

SCHEMA = json.loads((Path(__file__).parent / "gain_sheet.schema.json").read_text("utf-8"))
REASON = ("no held-out run",)


def read_back(outcome) -> dict:
    """The sheet as another program reads it."""
    return json.loads(sheet_bytes(sheet_of(outcome)))


@pytest.mark.parametrize("reasons", [(), REASON])
def test_a_sheet_has_the_names_and_types_that_were_promised(made, reasons) -> None:
    """Released or held, the sheet validates against the schema written out from the promise."""
    jsonschema.validate(read_back(made.outcome(reasons)), SCHEMA)


@pytest.mark.parametrize("key", ["plant", "selection", "provenance", "change", "candidate"])
def test_the_schema_sees_a_missing_key(made, key: str) -> None:
    """A held sheet without one of its keys does not validate."""
    sheet = read_back(made.outcome(REASON))
    del sheet[key]
    with pytest.raises(jsonschema.ValidationError):
        jsonschema.validate(sheet, SCHEMA)


def test_a_released_sheet_carries_its_controller_and_no_candidate(made) -> None:
    """The gains stand where a loader looks for them."""
    sheet = read_back(made.outcome())
    assert sheet["status"] == "released"
    assert sheet["controller"]["structure"] == "PI"
    assert "candidate" not in sheet


def test_a_held_sheet_shows_the_same_gains_under_candidate_only(made) -> None:
    """Nothing can load held gains by mistake, and nothing of them is lost."""
    held, released = read_back(made.outcome(REASON)), read_back(made.outcome())
    assert held["controller"] is None
    assert held["selection"] is None
    assert held["candidate"] == {"controller": released["controller"], "selection": released["selection"]}


def test_a_held_job_without_a_design_still_gives_a_sheet(made) -> None:
    """No gains were found: candidate is null, the plant is there."""
    sheet = read_back(replace(made.outcome(REASON), design=None))
    assert sheet["candidate"] is None
    assert sheet["plant"]["numerator"] == [10.0]


def test_a_status_that_contradicts_its_reasons_is_a_fault_of_the_program(made) -> None:
    """Released with a reason, or held without one, is never written."""
    with pytest.raises(SheetError, match="released with 1 reasons"):
        sheet_of(replace(made.outcome(), reasons=REASON))
    with pytest.raises(SheetError, match="held with 0 reasons"):
        sheet_of(replace(made.outcome(REASON), reasons=()))


@pytest.mark.parametrize("value", [math.nan, math.inf, -math.inf])
def test_a_number_that_is_none_is_a_fault_of_the_program(made, value: float) -> None:
    """NaN and infinities never reach a sheet; the message names the place."""
    broken = made.with_design(share_meeting=value)
    with pytest.raises(SheetError, match=r"sheet\.checked\.share_meeting is "):
        sheet_of(broken.outcome())


def test_a_nan_bound_is_refused_and_not_taken_for_unbounded(made) -> None:
    """Only infinity means that there is no bound."""
    selection = replace(made.design.selection, intervals=((math.nan, 1.0),))
    with pytest.raises(SheetError, match=r"selection\.intervals\[0\]\[0\] is nan"):
        sheet_of(made.with_design(selection=selection).outcome())


def test_a_numpy_number_that_slipped_through_is_refused() -> None:
    """A sheet holds plain JSON values; np.int64 would fail later, half-way through writing."""
    with pytest.raises(SheetError, match="int64"):
        refuse_numbers_that_are_none({"plants": np.int64(3)})


def test_the_difference_equation_keeps_every_digit(made) -> None:
    """At least 12 digits are promised; the numbers read back exactly."""
    equation = read_back(made.outcome())["controller"]["difference_equation"]
    assert equation["setpoint"] == [0.1239567890123, -0.1229567890123]
    assert equation["clamp"] == {"lowest": -11.0, "highest": 9.0, "rate": None}


def test_the_printed_gains_are_those_that_were_checked(made) -> None:
    """The parallel form carries the very numbers of the design, in command unit per response unit."""
    parallel = read_back(made.outcome())["controller"]["forms"]["parallel"]
    assert parallel["proportional"] == {"value": 0.1234567890123, "unit": "V/mm"}
    assert parallel["integral"] == {"value": 0.2, "unit": "V/(mm s)"}


def test_requirements_are_shown_in_the_unit_that_was_written(made) -> None:
    """Fractions become per cent, seconds become ms; never settling is null."""
    overshoot, settling, *_ = read_back(made.outcome())["requirements"]
    assert overshoot == {
        "name": "overshoot", "limit": 10.0, "predicted": 5.0, "interval_95": [4.0, 8.0], "unit": "%", "met": True,
        "asked": True, "unbounded": False,
    }  # fmt: skip
    assert (settling["limit"], settling["predicted"], settling["interval_95"]) == (2000.0, None, [1500.0, None])


def test_an_endless_margin_is_null_and_said_to_be_unbounded(made) -> None:
    """A loop whose phase never reaches -180 deg has no finite gain margin."""
    margin = read_back(made.outcome())["requirements"][2]
    assert margin["name"] == "gain_margin"
    assert margin["predicted"] is None
    assert margin["unbounded"] is True
    assert margin["met"] is True


def test_a_limit_said_to_be_not_limited_is_null(made) -> None:
    """JSON knows no infinity."""
    limit = replace(made.design.limits[0], limit=math.inf, headroom=math.inf)
    row = read_back(made.with_design(limits=(limit,)).outcome())["limits"][0]
    assert row["limit"] is None
    assert row["headroom"] is None


def test_the_gain_is_labelled_in_the_units_of_the_rig(made) -> None:
    """mm per V here; an integrating plant's gain is per second too."""
    assert read_back(made.outcome())["plant"]["parameters"]["gain"]["unit"] == "mm/V"
    integrating = replace(made, fit=replace(made.fit, plant=Plant((10.0,), (1.0, 0.0), 0.1)))
    assert read_back(integrating.outcome())["plant"]["parameters"]["gain"]["unit"] == "mm/(V s)"


def test_a_parameter_of_the_command_carries_the_command_unit(made) -> None:
    """Friction is measured in the command that it swallows: volts on this rig, and never the word itself."""
    friction = Parameter("friction forward", 0.2, "command", 0.01, 0.18, 0.22)
    sticking = replace(made, fit=replace(made.fit, parameters=(*made.fit.parameters, friction)))
    assert read_back(sticking.outcome())["plant"]["parameters"]["friction forward"]["unit"] == "V"


@pytest.mark.parametrize(("sign", "action"), [(1.0, "reverse"), (-1.0, "direct")])
def test_the_action_says_which_way_the_command_moves(made, sign: float, action: str) -> None:
    """Reverse: the command falls when the response rises, as positive gains make it do."""
    gains = made.design.gains
    turned = replace(gains, proportional=sign * gains.proportional, integral=sign * gains.integral)
    assert read_back(made.with_design(gains=turned).outcome())["controller"]["action"] == action


def test_a_held_out_record_keeps_its_window_and_its_samples_mark(made) -> None:
    """The closing row finds the bytes again."""
    row = read_back(made.outcome())["closing"][0]
    assert (row["file"], row["window"], row["samples_sha256"]) == ("step_2.csv", [0.0, 4.0], "step_2.csv-samples")


def test_what_was_not_done_is_said(made) -> None:
    """A job without a ladder says so in a caution."""
    sheet = read_back(made.outcome())
    assert sheet["ladder"] == []
    assert any("no gain ladder" in caution for caution in sheet["cautions"])


def test_a_requirement_without_a_unit_is_a_pure_number(made) -> None:
    """peak_sensitivity has no unit: the sheet writes 1, as rig files do."""
    judged = replace(made.design.judged[0], requirement=Requirement("peak_sensitivity", 1.7, "at_most"))
    assert read_back(made.with_design(judged=(judged,)).outcome())["requirements"][0]["unit"] == "1"


def test_further_forms_stand_on_the_sheet_and_a_missing_one_says_why(made) -> None:
    """A PI: minutes, repeats and per sample beside the four; no band without ranges, no zero-pole form."""
    signals = {**made.rig.signals, "response": replace(made.rig.signals["response"], highest=None)}
    controller = read_back(replace(made.outcome(), rig=replace(made.rig, signals=signals)))["controller"]
    gains, further = made.design.gains, controller["further_forms"]
    seconds = gains.proportional / gains.integral
    assert further["standard, minutes"]["integral_time"] == {"value": pytest.approx(seconds / 60.0), "unit": "min"}
    per_sample = made.rig.setting.update_interval * gains.integral
    assert further["per sample"]["integral_per_sample"]["value"] == pytest.approx(per_sample)
    assert further["proportional band"] is None
    assert "range" in controller["forms_missing"]["proportional band"]
    assert "no lead or lag" in controller["forms_missing"]["zero-pole"]
    lost = {name for name, form in {**controller["forms"], **further}.items() if form is None}
    assert lost == set(controller["forms_missing"])


def test_ranges_of_both_signals_give_a_proportional_band(made) -> None:
    """0 to 300 mm; a command of -10 to 10 V by its limits, or of 5 V by its range: 100 %/G times 20/300 or 5/300."""
    ranged = {**made.rig.signals, "command": replace(made.rig.signals["command"], lowest=0.0, highest=5.0)}
    for rig, wide in ((made.rig, 20.0), (replace(made.rig, signals=ranged), 5.0)):
        sheet = read_back(replace(made.outcome(), rig=rig))
        band = sheet["controller"]["further_forms"]["proportional band"]["proportional_band"]
        wanted = 100.0 * wide / 300.0 / abs(made.design.gains.proportional)
        assert band == {"value": pytest.approx(wanted), "unit": "%"}
