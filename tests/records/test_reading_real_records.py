"""The records of physical rigs in ../shared/data: each is read whole, and only what its README tells of is found."""

import os
from pathlib import Path

import numpy as np
import pytest
from gainwright.design.requirements import ControllerSetting, Limits, Requirements
from gainwright.io.read_record import read_record, shares_samples
from gainwright.io.record import Record
from gainwright.io.rigfile.rig import LogDialect, Rig, RunSpec, Signal

DATA = Path(__file__).resolve().parents[2].parent / "shared" / "data"

# file: command, response, samples (README of each record), lost samples (README: every 512th, exactly 0, in the
# two closed-loop records; the 20 zeros of prbs's command are genuine)
RECORDS = {
    "hair_dryer/hair_dryer.csv": ("heater_V", "outlet_temp_V", 1000, 0),
    "lamp_heater/lamp_heater.csv": ("lamp_V", "plate_temp_degC", 801, 0),
    "rcrc_circuit/prbs.csv": ("dac_norm", "adc_norm", 29696, 0),
    "rcrc_circuit/square_wave.csv": ("dac_norm", "adc_norm", 5120, 0),
    "rcrc_circuit/closed_loop_output_vs_control.csv": ("dac_norm", "adc_norm", 25600, 50),
    "rcrc_circuit/closed_loop_output_vs_reference.csv": ("reference_norm", "adc_norm", 5120, 10),
    "silverbox/arrow_low_amplitude.csv": ("u_V", "y_V", 12000, 0),
    "silverbox/multisine_part.csv": ("u_V", "y_V", 12000, 0),
    "silverbox/schroeder_sweep_one_period.csv": ("u_V", "y_V", 1024, 0),
}


def real(name: str) -> Path:
    """Path of a real record; without it the test is skipped aloud, and fails where CI is set."""
    path = DATA / name
    if not path.is_file():
        if os.environ.get("CI"):
            pytest.fail(f"the record {path} is absent, and CI is set")
        pytest.skip(f"the record {path} is absent")
    return path


def read(name: str) -> Record:
    """Read a real record as a fit run, every signal a pure number."""
    drive, meas, _, _ = RECORDS[name]
    signals = {"time": Signal("time_s", "s"), "command": Signal(drive, "1"), "response": Signal(meas, "1")}
    path = real(name)
    spec = RunSpec(path, path.name, "fit", "open", "auto", "auto", signals)
    rig = Rig("a rig", path, "", "1", "1", signals, (), LogDialect(), ControllerSetting(0.01), Requirements(), Limits())
    return read_record(spec, rig)


@pytest.mark.parametrize("name", RECORDS)
def test_a_real_record_is_read_whole_and_refused_for_nothing(name: str) -> None:
    """As many samples as its README says, the lost ones taken out, no refusing finding."""
    record = read(name)
    _, _, samples, lost = RECORDS[name]
    assert len(record.run.time) == samples
    assert np.count_nonzero(np.isnan(record.run.response)) == lost
    assert [finding.text for finding in record.findings if finding.refuses != "no"] == []
    steps = np.diff(record.run.time)
    assert np.ptp(steps) < 1e-6 * steps.mean()  # all of them were sampled evenly; some stamps have eight digits only


def test_no_two_real_records_share_samples() -> None:
    """All were measured apart; the two parts of one long silverbox record don't overlap."""
    records = [read(name) for name in RECORDS]
    shared = [(a.run.label, b.run.label) for i, a in enumerate(records) for b in records[:i] if shares_samples(a, b)]
    assert shared == []
