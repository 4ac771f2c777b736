"""A frequency table is drafted as one: its columns found, its units guessed, and the draft loads."""

from pathlib import Path

import numpy as np
import pytest
from gainwright.io.drafting.draft import draft_rig, write_draft
from gainwright.io.read_table import read_table
from gainwright.io.rigfile.load import load_rig


def table(path: Path, header: str, decibel: bool = True) -> Path:
    """Twelve points of 2/(s + 1) from 0.02 to 2 Hz."""
    hertz = np.geomspace(0.02, 2.0, 12)
    plant = 2.0 / (2j * np.pi * hertz + 1.0)
    size = 20 * np.log10(np.abs(plant)) if decibel else np.abs(plant)
    columns = np.column_stack([hertz, size, np.degrees(np.angle(plant)), np.full(12, 0.98)])
    np.savetxt(path, columns, fmt="%.8g", delimiter=",", header=header, comments="", encoding="utf-8")
    return path


@pytest.mark.parametrize(
    ("header", "decibel"),
    [
        ("frequency [Hz],magnitude [dB],phase [deg],coherence", True),
        ("f,mag_dB,phase,coh", True),
        ("freq_Hz,gain,ph_deg,gamma2", False),
    ],
)
def test_a_table_is_drafted_with_its_columns(header: str, decibel: bool, tmp_path: Path) -> None:
    """The draft loads, every guess marked, and the table read by it is the one that was written."""
    file, path = table(tmp_path / "table.csv", header, decibel), tmp_path / "rig.toml"
    write_draft(draft_rig(file, path), path)
    rig = load_rig(path)
    assert rig.guessed
    (spec,) = rig.runs
    assert set(spec.signals) == {"frequency", "magnitude", "phase", "coherence"}
    read = read_table(spec, rig).table
    plant = 2.0 / (1j * read.frequency + 1.0)
    np.testing.assert_allclose(read.response, plant, rtol=1e-5)


def test_a_log_in_time_is_no_table(tmp_path: Path) -> None:
    """A frequency among the channels of a log does not make it a table."""
    path, time = tmp_path / "log.csv", 0.1 * np.arange(50)
    rows = np.column_stack([time, np.where(time < 1, 0.0, 1.0), np.sin(time), 1.0 + time])
    np.savetxt(path, rows, fmt="%.6g", delimiter=",", header="time_s,drive_V,gain_mm,freq_Hz", comments="")
    assert "frequency-table" not in draft_rig(path, tmp_path / "rig.toml")
