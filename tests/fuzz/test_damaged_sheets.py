"""Gain sheets that somebody has damaged: refused in words, by `recheck` and by a rig file that names one."""

import json
from pathlib import Path
from typing import Any

import pytest
import rig_inputs
from gainwright.ident.errors import RequestError
from gainwright.io.earlier import SCHEMA, read_earlier
from gainwright.io.rigfile.load import load_rig

PLANT = {
    "numerator": [10.0],
    "denominator": [1.0, 3.0, 0.0],
    "dead_time": 0.1,
    "command_unit": "V",
    "response_unit": "mm",
}
DAMAGED: dict[str, Any] = {
    "dead time below zero": {**PLANT, "dead_time": -1.0},
    "endless coefficient": {**PLANT, "numerator": [10**400]},
    "infinite coefficient": {**PLANT, "numerator": [float("inf")]},
    "coefficients of text": {**PLANT, "denominator": ["a", "b"]},
    "no list": {**PLANT, "numerator": 5},
    "parameters that are none": {**PLANT, "parameters": 3},
    "friction without value": {**PLANT, "parameters": {"friction": {}}},
    "plant of another kind": [1],
}


@pytest.mark.parametrize("damaged", DAMAGED)
def test_a_rig_file_that_names_a_damaged_sheet_is_refused(tmp_path: Path, damaged: str) -> None:
    """Some of these were a traceback, some were no plant at all and no word about it."""
    named = rig_inputs.GIVEN.replace(
        "numerator = [10.0]\ndenominator = [1.0, 3.0, 2.0, 0.0]\ndead_time = ", 'sheet = "s.json"\n#'
    )
    (tmp_path / "rig.toml").write_text(named)
    (tmp_path / "log.csv").write_text("t,u,y\n0,0,0\n1,1,1\n")
    (tmp_path / "s.json").write_text(json.dumps({"plant": PLANT}))
    assert load_rig(tmp_path / "rig.toml").given is not None
    (tmp_path / "s.json").write_text(json.dumps({"plant": DAMAGED[damaged]}))
    with pytest.raises(RequestError, match=r"plant\.sheet"):
        load_rig(tmp_path / "rig.toml")


@pytest.mark.parametrize(
    "content",
    [
        "[" * 100_000,
        json.dumps({"schema": SCHEMA, "controller": [], "plant": 3, "operating_point": 3}),
        json.dumps(
            {"schema": SCHEMA, "controller": {"forms": {"parallel": []}}, "plant": PLANT, "operating_point": {}}
        ),
        json.dumps(
            {
                "schema": SCHEMA,
                "controller": 1,
                "plant": 1,
                "operating_point": {"command": {"interval_95": [0, 10**400]}},
            }
        ),
    ],
)
def test_an_earlier_sheet_that_is_damaged_is_refused(tmp_path: Path, content: str) -> None:
    """JSON without end, and values of another kind."""
    (tmp_path / "gains.json").write_text(content)
    with pytest.raises(RequestError) as caught:
        read_earlier(tmp_path / "gains.json")
    assert "gains.json" in caught.value.where
