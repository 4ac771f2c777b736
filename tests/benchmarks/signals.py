"""Spectra beside scipy's three calls and one transform; reading beside pandas and h5py alone."""

import tempfile
from pathlib import Path

import h5py
import numpy as np
import pandas as pd
from gainwright.ident.spectra import spectra
from gainwright.io.read_record import read_record
from gainwright.io.rigfile.load import load_rig
from measure import Line, one_pass, seconds
from records import record
from scipy.signal import csd, welch

RIG = """
[rig]
name = "made"
[signals]
time = {{ source = "time", unit = "s" }}
command = {{ source = "command", unit = "V" }}
response = {{ source = "response", unit = "mm" }}
[[runs]]
file = "{file}"
use = "fit"
[controller]
update_interval = "20 ms"
"""


def spectra_lines(quick):
    """H1 and coherence of one record, segments of 1,024."""
    for samples in (10_000,) if quick else (100_000, 1_000_000):
        run = record("lag", samples, busy=True)
        interval = float(run.time[1])

        def three(run=run, interval=interval):
            for x in (run.command, run.response):
                welch(x, 1 / interval, "hann", 1024, 512)
            csd(run.command, run.response, 1 / interval, "hann", 1024, 512)

        taken = seconds(lambda run=run, interval=interval: spectra(run.command, run.response, interval, 1024), 5)
        transform = seconds(lambda run=run: np.fft.rfft(run.response), 5)
        beside = (("csd and two welch: times longer", seconds(three, 5) / taken), ("rfft", taken / transform))
        yield Line("spectra", f"{samples:,} samples", taken, (*beside, ("passes", taken / one_pass(samples))))


def reading_lines(quick):
    """A log through the rig file, health findings included, beside the bare library."""
    samples = 10_000 if quick else 200_000
    run = record("lag", samples)
    columns = {"time": run.time, "command": run.command, "response": run.response}
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        pd.DataFrame(columns).to_csv(folder / "made.csv", index=False)
        with h5py.File(folder / "made.h5", "w") as file:
            for key, values in columns.items():
                file[key] = values
        for file in ("made.csv", "made.h5"):
            (folder / "rig.toml").write_text(RIG.format(file=file), "utf-8")
            rig = load_rig(folder / "rig.toml")
            taken = seconds(lambda rig=rig: read_record(rig.runs[0], rig), 3)
            bare = seconds(lambda file=folder / file: _bare(file), 3)
            yield Line("reading", f"{file}, {samples:,} rows", taken, ((f"of {_library(file)} alone", taken / bare),))


def _library(file):
    return "pandas" if file.endswith("csv") else "h5py"


def _bare(file):
    if file.suffix == ".csv":
        return pd.read_csv(file)
    with h5py.File(file, "r") as opened:
        return [opened[key][:] for key in ("time", "command", "response")]
