"""An earlier sheet is read back as it was written, or refused in words."""

import json
from dataclasses import replace

import numpy as np
import pytest
from gainwright.design.requirements import Limits
from gainwright.ident.errors import RequestError
from gainwright.io.asked import asked_again, asked_of
from gainwright.io.earlier import read_earlier
from gainwright.io.sheet import sheet_bytes, sheet_of


@pytest.fixture
def written(made, tmp_path):
    """The made job's sheet on disk."""
    file = tmp_path / "gains.json"
    file.write_bytes(sheet_bytes(sheet_of(made.outcome())))
    return file


def test_gains_law_and_plant_come_back(made, written) -> None:
    """Every number as it was."""
    earlier = read_earlier(written)
    assert earlier.gains == made.design.gains
    assert earlier.law == made.design.law
    assert earlier.known.plant == made.fit.plant
    np.testing.assert_array_equal(earlier.known.covariance, made.fit.covariance)
    assert (earlier.operating_command, earlier.operating_response) == (
        made.fit.operating_command,
        made.fit.operating_response,
    )


def test_a_held_sheet_gives_its_candidate_and_says_so(made, tmp_path) -> None:
    """Nothing forgets that it was never released."""
    file = tmp_path / "gains.json"
    file.write_bytes(sheet_bytes(sheet_of(made.outcome(("no held-out run",)))))
    earlier = read_earlier(file)
    assert earlier.gains == made.design.gains
    assert not earlier.released
    assert earlier.trail["status"] == "held"


def test_what_was_asked_comes_back(made) -> None:
    """Requirements, limits ("not limited" among them) and the setting of the controller."""
    free = replace(made.rig, limits=replace(made.rig.limits, response_lowest=-np.inf, response_highest=np.inf))
    for rig in (made.rig, free):
        asked = json.loads(json.dumps(asked_of(rig), allow_nan=False))
        assert asked_again(asked) == (rig.requirements, rig.limits, rig.setting)
    assert isinstance(free.limits, Limits)


@pytest.mark.parametrize(
    ("content", "said"),
    [
        ("not json", "no JSON"),
        ('{"schema": "something else"}', "schema something else"),
        ('["gainwright.gain-sheet/1"]', "schema None"),
        ('{"schema": "gainwright.gain-sheet/1"}', "lacks something"),
        ('{"schema": "gainwright.gain-sheet/1", "controller": null, "plant": null}', "holds no gains"),
    ],
)
def test_what_is_no_sheet_is_refused_in_words(tmp_path, content, said) -> None:
    """The file, what was found, what was expected."""
    file = tmp_path / "gains.json"
    file.write_text(content, "utf-8")
    with pytest.raises(RequestError, match=said):
        read_earlier(file)


def test_a_missing_sheet_is_refused(tmp_path) -> None:
    """Exit code 2, with the path."""
    with pytest.raises(RequestError, match="can't be read"):
        read_earlier(tmp_path / "gains.json")
