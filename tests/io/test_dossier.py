"""The dossier is read with h5py alone, says the unit of everything, and holds what was handed in."""

import io

import h5py
import numpy as np
import pytest
from gainwright.io.dossier import dossier_bytes


@pytest.fixture
def dossier(made) -> h5py.File:
    """The made job's dossier, open as any program would open it."""
    with h5py.File(io.BytesIO(dossier_bytes(made.outcome(("held for a test",)))), "r") as file:
        yield file


def datasets(file: h5py.File) -> dict[str, h5py.Dataset]:
    """Every dataset by its path."""
    found: dict[str, h5py.Dataset] = {}
    file.visititems(lambda name, item: found.update({name: item} if isinstance(item, h5py.Dataset) else {}))
    return found


def test_every_dataset_says_its_unit_and_what_it_is(dossier) -> None:
    """A number without a unit is a trap; words have an empty one."""
    everything = datasets(dossier)
    assert len(everything) > 60
    assert [name for name, item in everything.items() if not str(item.attrs["description"])] == []
    assert [name for name, item in everything.items() if item.dtype.kind == "f" and not str(item.attrs["units"])] == []


def test_the_records_are_in_it_as_they_were_read(dossier, made) -> None:
    """Both runs, in the order of the rig file, with the units of the log."""
    for place, record in enumerate(made.records):
        group = dossier[f"runs/{place}"]
        np.testing.assert_array_equal(group["response"], record.run.response)
        assert group["response"].attrs["units"] == "mm"
        assert group["command"].attrs["units"] == "V"
        assert group.attrs["use"] == record.spec.use


def test_the_residual_is_response_less_model(dossier) -> None:
    """The made model lies 0.25 mm below the response everywhere."""
    np.testing.assert_allclose(dossier["fit/runs/0/residual"], 0.25, atol=1e-12)


def test_plausible_plants_of_different_order_share_one_table(dossier) -> None:
    """Shorter polynomials have zeros in front, so that a row is read with polyval whatever its order."""
    np.testing.assert_array_equal(dossier["plausible/numerator"], [[0.0, 10.0], [40.0, 10.0]])
    np.testing.assert_array_equal(dossier["plausible/denominator"], [[0.0, 0.5, 1.0], [0.1, 0.5, 1.0]])


def test_never_and_unbounded_are_nan_in_the_dossier(dossier) -> None:
    """The made loop never settles, and has no lower bound of K for its overshoot."""
    names = [name.decode() for name in dossier["design/requirements/name"]]
    assert np.isnan(dossier["design/requirements/predicted"][names.index("settling_time")])
    assert np.isnan(dossier["design/selection/rows/overshoot"][0, 0])


def test_the_held_out_prediction_and_its_band_are_in_it(dossier, made) -> None:
    """Everything that the verdict was made of."""
    np.testing.assert_array_equal(dossier["closing/0/low"], made.closing[0].low)
    assert dossier["closing/0"].attrs["verdict"] == "agrees"


def test_the_reasons_and_status_are_in_it(dossier) -> None:
    """A dossier that lost its sheet still says that the gains were held."""
    assert dossier.attrs["status"] == "held"
    assert [text.decode() for text in dossier["reasons"]] == ["held for a test"]
