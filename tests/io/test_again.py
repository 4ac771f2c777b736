"""An earlier job put together again from its sheet alone, or refused where the sheet alone is not enough."""

import json

import numpy as np
import pytest
from gainwright.ident.errors import RequestError
from gainwright.io.again import job_again
from gainwright.io.earlier import read_earlier
from gainwright.io.sheet import sheet_bytes, sheet_of


@pytest.fixture
def sheet(made, tmp_path):
    """A sheet on disk with some of its plant changed; no dossier beside it."""

    def write(**plant):
        content = json.loads(sheet_bytes(sheet_of(made.outcome())))
        content["plant"] |= {"structure": "lag", **plant}
        file = tmp_path / "gains.json"
        file.write_text(json.dumps(content), "utf-8")
        return read_earlier(file)

    return write


def test_plants_and_draws_come_from_the_covariance(made, sheet) -> None:
    """Draws are logarithm of the time constant, dead time, gain; their middle is what was fitted."""
    again = job_again(sheet())
    values = {parameter.name: parameter for parameter in made.fit.parameters}
    assert not again.from_dossier
    assert len(again.fit.plausible.plants) >= 1000
    middle = np.median(again.fit.draws, axis=0)
    assert middle[-1] == pytest.approx(values["gain"].value, abs=0.2 * values["gain"].std_error)
    assert (again.design.gains, again.requirements) == (made.design.gains, made.rig.requirements)


def test_a_plant_with_a_zero_needs_its_dossier(sheet) -> None:
    """Its draws can't be made from the named parameters alone."""
    earlier = sheet(structure="lag with zero", numerator=[3.0, 10.0])
    with pytest.raises(RequestError, match="without its dossier"):
        job_again(earlier)


def test_an_unknown_structure_is_refused(sheet) -> None:
    """Nobody could fit it to a fresh record."""
    with pytest.raises(RequestError, match="can't be rechecked\n"):
        job_again(sheet(structure="a plant of another program"))


def test_a_given_plant_needs_its_dossier(sheet) -> None:
    """Its plausible plants came from its tolerance, which the covariance does not hold."""
    with pytest.raises(RequestError, match="without its dossier"):
        job_again(sheet(structure="given plant"))
