"""The schemas that are shipped accept what the program takes and writes, and refuse what it does not."""

import copy
import io
import json
import tomllib
from dataclasses import replace
from pathlib import Path

import jsonschema
import pytest
from gainwright.design.ladder.build import build_ladder
from gainwright.io.commands.main import main
from gainwright.io.schemas.gain_sheet import gain_sheet_schema
from gainwright.io.schemas.rig_file import rig_file_schema
from gainwright.io.sheet import sheet_bytes, sheet_of

SAMPLES = Path(__file__).resolve().parents[2] / "sample_runs"
PROMISED = json.loads((Path(__file__).parent / "gain_sheet.schema.json").read_text("utf-8"))


def as_json(text: str) -> dict:
    """TOML as JSON values, dates as text."""
    return json.loads(json.dumps(tomllib.loads(text), default=str))


@pytest.fixture
def sheet(made) -> dict:
    """The made job's sheet with its ladder."""
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
    return json.loads(sheet_bytes(sheet_of(replace(made.outcome(), ladder=ladder))))


@pytest.mark.parametrize("name", ["rig-file", "gain-sheet"])
def test_the_command_prints_a_valid_schema(name: str, capsys) -> None:
    """Draft 2020-12, as it says itself."""
    assert main(["schema", name]) == 0
    printed = json.load(io.StringIO(capsys.readouterr().out))
    assert printed["$schema"] == "https://json-schema.org/draft/2020-12/schema"
    jsonschema.Draft202012Validator.check_schema(printed)


@pytest.mark.parametrize("rig_file", sorted(SAMPLES.glob("*/rig.toml")), ids=lambda path: path.parent.name)
def test_every_sample_rig_file_fits_the_schema(rig_file: Path) -> None:
    """What the program takes."""
    jsonschema.validate(as_json(rig_file.read_text("utf-8")), rig_file_schema())


TAKEN = """
[rig]
name = "x"
[signals]
time = { sample_rate = "1 kHz" }
command = { source = "u", unit = "V" }
response = { source = "y", unit = "mm", range = { lowest = "0 mm" } }
[[runs]]
file = "a.csv"
use = "fit"
taken = 2026-11-03
from = "1 s"
signals = { setpoint = false }
[controller]
update_interval = "5 ms"
[limits]
command = "not limited"
command_rate = "not limited"
response = { lowest = "0 mm", highest = "not limited" }
"""


def test_dates_windows_and_not_limited_fit_the_schema() -> None:
    """The short words that stand for whole tables are known."""
    jsonschema.validate(as_json(TAKEN), rig_file_schema())


TABLES = """
[rig]
name = "x"
[operating_point]
command = "3 V"
response = "50 mm"
[signals]
command = { unit = "V" }
response = { unit = "mm" }
[[runs]]
file = "a.csv"
use = "fit"
excitation = "frequency-table"
frequency = { source = "f", unit = "Hz" }
magnitude = { source = "size", unit = "dB" }
[controller]
update_interval = "5 ms"
"""


def test_tables_alone_and_a_log_without_its_command_fit_the_schema() -> None:
    """A rig file of frequency tables names no time; `command = false` says that a log has none."""
    jsonschema.validate(as_json(TABLES), rig_file_schema())
    jsonschema.validate(as_json(TAKEN.replace("setpoint = false", "command = false")), rig_file_schema())


@pytest.mark.parametrize(
    ("good", "bad"),
    [
        ('name = "x"', 'nane = "x"'),
        ('use = "fit"', 'use = "both"'),
        ('update_interval = "5 ms"', "update_interval = 5"),
        ('command = "not limited"', 'command = "unlimited"'),
        ("setpoint = false", "setpoint = true"),
        ('file = "a.csv"', ""),
    ],
)
def test_what_the_program_refuses_does_not_fit(good: str, bad: str) -> None:
    """One slip at a time."""
    with pytest.raises(jsonschema.ValidationError):
        jsonschema.validate(as_json(TAKEN.replace(good, bad, 1)), rig_file_schema())


def test_a_sheet_with_its_ladder_fits_the_shipped_schema_and_the_promise(sheet) -> None:
    """The schema of the package asks for everything that the test's own copy of the promise asks for."""
    jsonschema.validate(sheet, gain_sheet_schema())
    jsonschema.validate(sheet, PROMISED)
    assert set(gain_sheet_schema()["required"]) >= set(PROMISED["required"])
    assert set(gain_sheet_schema()["properties"]) >= set(PROMISED["properties"])


CHANGE = {
    "parameters": [
        {"name": "gain", "unit": "mm/V", "before": 1.0, "after": 2.0, "difference": 1.0, "interval_95": [0.5, 1.5],
         "changed": True}
    ],
    "changed": True, "p_value": 0.001, "old_gains": {"share_meeting": 0.4, "requirements": [], "verdict": "replace"},
}  # fmt: skip


def broken(sheet: dict, path: str) -> dict:
    """The sheet without the key at a path."""
    copied = copy.deepcopy({**sheet, "change": CHANGE})
    *way, last = path.split("/")
    at = copied
    for step in way:
        at = at[int(step)] if step.isdigit() else at[step]
    del at[last]
    return copied


@pytest.mark.parametrize(
    "path",
    [
        "ladder/0/abort", "ladder/1/forms", "ladder/2/expected", "ladder/3/lowest_gain_margin", "ladder/1/abort/then",
        "ladder/1/forms/parallel/proportional", "ladder/2/difference_equation/clamp", "change/p_value",
        "change/parameters/0/interval_95", "change/old_gains/verdict", "closing/0/why", "ladder",
    ],
)  # fmt: skip
def test_a_sheet_that_lacks_a_promised_key_does_not_fit(sheet, path: str) -> None:
    """Each key of ladder, change and closing is asked for; with all of them it fits."""
    jsonschema.validate({**sheet, "change": CHANGE}, gain_sheet_schema())
    with pytest.raises(jsonschema.ValidationError):
        jsonschema.validate(broken(sheet, path), gain_sheet_schema())
