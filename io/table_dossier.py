"""Frequency tables in the dossier: as read, as fitted, as held out."""

import h5py
import numpy as np

from ..ident.tables import FittedTable
from .dossier_parts import numbers, texts
from .record import TableRecord
from .rigfile.rig import Rig


def put_table(group: h5py.Group, record: TableRecord, rig: Rig) -> None:
    """A table as read, in rad/s, response unit per command unit and rad."""
    table, gain = record.table, _gain(rig)
    group.attrs["file"] = record.spec.shown
    group.attrs["use"] = record.spec.use
    group.attrs["sha256"] = record.sha256
    group.attrs["samples_sha256"] = record.samples_sha256
    numbers(group, "frequency", table.frequency, "rad/s", "of the points")
    numbers(group, "magnitude", table.magnitude, gain, "as given")
    for name, values, unit, text in (
        ("phase", table.phase, "rad", "as given, a lag negative"),
        ("magnitude_error", table.magnitude_error, gain, "standard error as given"),
        ("phase_error", table.phase_error, "rad", "standard error as given"),
        ("coherence", table.coherence, "1", "squared coherence as given"),
    ):
        if values is not None:
            numbers(group, name, values, unit, text)
    texts(group, "findings", (each.text for each in record.findings), "what was seen in this table")


def put_fitted_table(group: h5py.Group, table: FittedTable, rig: Rig) -> None:
    """The points of a table beside the fitted plant."""
    gain = _gain(rig)
    group.attrs["label"] = table.label
    numbers(group, "frequency", table.frequency, "rad/s", "of the points")
    numbers(group, "magnitude", table.magnitude, gain, "as given")
    if table.phase is not None:
        numbers(group, "phase", table.phase, "rad", "as given, a lag negative")
    used = "standard error as used: given, or from the residual"
    numbers(group, "magnitude_error", table.magnitude_error, gain, used)
    numbers(group, "phase_error", table.phase_error, "rad", used)
    numbers(group, "model_magnitude", np.abs(table.model), gain, "of the fitted plant, dead time included")
    numbers(group, "model_phase", np.angle(table.model), "rad", "of the fitted plant, dead time included")


def _gain(rig: Rig) -> str:
    return f"({rig.response_unit})/({rig.command_unit})"
