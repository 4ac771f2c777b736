"""Logs that are too large to be read at once, in small: the limits are lowered, the logs are a few 10,000 samples."""

import re
from collections.abc import Callable
from pathlib import Path

import h5py
import numpy as np
import pandas as pd
import pytest
from gainwright.ident.errors import RecordError, RequestError
from gainwright.io import thinning
from gainwright.io.drafting.draft import draft_rig
from gainwright.io.read_record import read_record, shares_samples
from gainwright.io.readers import parts
from gainwright.io.record import Record
from gainwright.io.rigfile.load import load_rig
from scipy.signal import lfilter

INTERVAL, LAG = 1e-3, 0.4  # s
RIG = """
[rig]
name = "bench"
[signals]
time = {{ {time} }}
command = {{ source = "u", unit = "V" }}
response = {{ source = "y", unit = "mm" }}
[[runs]]
file = "{file}"
use = "fit"
{more}
[controller]
update_interval = "{update}"
structures = ["P"]
[requirements]
test_step = "1 mm"
[limits]
command = {{ lowest = "-10 V", highest = "10 V" }}
response = "not limited"
"""
CLOCK = 'source = "t", unit = "s"'
Columns = dict[str, np.ndarray]


def made(count: int = 40_000, seed: int = 1) -> Columns:
    """Steps of 0.3 s to 2 s on a lag of 0.4 s, with noise; at rest for the first second."""
    rng = np.random.default_rng(seed)
    lengths = rng.integers(300, 2_000, size=count // 300)
    u = np.concatenate([np.zeros(1_000), np.repeat(rng.uniform(-2.0, 2.0, len(lengths)), lengths)])[:count]
    pole = np.exp(-INTERVAL / LAG)
    y = lfilter([0.0, 2.0 * (1.0 - pole)], [1.0, -pole], u)
    return {"t": INTERVAL * np.arange(count), "u": u, "y": 5.0 + y + rng.normal(0.0, 0.02, count)}


@pytest.fixture(autouse=True)
def low_limits(monkeypatch: pytest.MonkeyPatch) -> None:
    """More than 20,000 samples are large, parts have about 7,001, at most 5,000 blocks are kept."""
    monkeypatch.setattr(parts, "LARGEST_WHOLE", 20_000)
    monkeypatch.setattr(thinning, "PART", 7_001)
    monkeypatch.setattr(thinning, "MOST_BLOCKS", 5_000)


def written_hdf5(path: Path, columns: Columns) -> None:
    with h5py.File(path, "w") as file:
        for name, values in columns.items():
            file[name] = values


def written_csv(path: Path, columns: Columns) -> None:
    pd.DataFrame(columns).to_csv(path, index=False, na_rep="nan")  # the shortest text that is the same number again


def read(folder: Path, columns: Columns, *, name: str = "run.csv", time: str = CLOCK, update: str = "40 ms",
         more: str = "", write: Callable[[Path, Columns], None] = written_csv) -> Record:  # fmt: skip
    """One log written and read through a rig file."""
    write(folder / name, columns)
    (folder / "rig.toml").write_text(RIG.format(file=name, time=time, update=update, more=more), "utf-8")
    rig = load_rig(folder / "rig.toml")
    return read_record(rig.runs[0], rig)


def kinds(record: Record) -> dict[str, str]:
    return {finding.kind: finding.refuses for finding in record.findings}


def test_a_large_log_is_kept_as_means_over_blocks(tmp_path: Path) -> None:
    """40,000 samples in 5,000 blocks of 8: the means that numpy makes, said in words, straight in between."""
    columns = made()
    record = read(tmp_path, columns)
    assert kinds(record) == {"read by blocks of 8 samples": "no"}
    assert record.run.between == "interpolated"
    means = {name: values.reshape(-1, 8).mean(axis=1) for name, values in columns.items()}
    np.testing.assert_allclose(record.run.time, means["t"] - means["t"][0], rtol=0.0, atol=1e-9)
    moved = np.diff(means["u"], prepend=means["u"][0]) / 16.0
    np.testing.assert_allclose(record.run.command, means["u"] - moved, rtol=0.0, atol=1e-12)
    inner = means["y"].copy()
    inner[1:-1] += np.diff(means["y"], 2) / 12.0
    np.testing.assert_allclose(record.run.response, inner, rtol=0.0, atol=1e-9)


def test_every_way_of_writing_the_same_log_gives_the_same_blocks(tmp_path: Path) -> None:
    """HDF5 or text, a clock or a sample rate: and each is known as a copy of the other."""
    columns = made()
    a = read(tmp_path, columns)
    b = read(tmp_path, columns, name="run.h5", write=written_hdf5)
    c = read(tmp_path, columns, time='sample_rate = "1 kHz"')
    for other in (b, c):
        np.testing.assert_allclose(other.run.time, a.run.time, rtol=0.0, atol=1e-9)
        np.testing.assert_array_equal(other.run.command, a.run.command)
        np.testing.assert_array_equal(other.run.response, a.run.response)
        assert shares_samples(a, other)


def test_blocks_are_at_most_half_the_controllers_interval_and_the_busiest_part_is_taken(tmp_path: Path) -> None:
    """With 10 ms between updates blocks have 5 samples at most; with 2 ms there are none, and the rest is left out."""
    columns = made()
    columns["u"][:12_000] = 0.0  # nothing moves here: not the part to take
    for update, factor in (("10 ms", 5), ("2 ms", 1)):
        record = read(tmp_path, columns, update=update)
        said = [finding for finding in record.findings if finding.kind == "a part of the record is used"]
        assert len(said) == 1
        assert float(said[0].where.split(" s")[0]) > 11.0 / factor
        assert 5_000 <= len(record.run.time) <= 5_000 + 7_001
        assert record.run.command_before is not None
        interval = float(np.median(np.diff(record.run.time)))
        assert interval == pytest.approx(factor * INTERVAL, rel=1e-9)
        assert record.run.between == ("interpolated" if factor > 1 else "auto")


def test_what_is_wrong_with_single_samples_is_seen_before_they_are_averaged(tmp_path: Path) -> None:
    """Spikes, lost samples and a short gap in three parts; a spike beside the seam of two parts too."""
    columns = made()
    spikes = np.array([3_000, 7_000, 7_001, 7_002, 21_003, 39_996])
    columns["y"][[3_000, 7_000, 21_003]] += 5.0
    columns["y"][30_000:30_020] = np.nan
    gap = np.setdiff1d(np.arange(40_000), np.arange(15_000, 15_003))
    record = read(tmp_path, {name: values[gap] for name, values in columns.items()})
    found = {finding.kind: finding for finding in record.findings}
    assert {"spikes", "lost samples", "gap"} < set(found)
    assert found["lost samples"].size.startswith("23 samples")
    clean = read(tmp_path, made())
    near = np.isin(np.round(clean.run.time / 0.008), np.round(columns["t"][spikes] / 0.008))
    same = np.interp(clean.run.time[near], record.run.time, record.run.response)
    np.testing.assert_allclose(same, clean.run.response[near], atol=0.02)


def test_clipping_of_a_few_samples_holds_though_no_block_stands_still(tmp_path: Path) -> None:
    """Twenty samples at the top, three of them together: seen sample by sample."""
    columns = made()
    columns["y"] = np.minimum(columns["y"], np.sort(columns["y"])[-600])
    assert kinds(read(tmp_path, columns))["clipping"] == "holds"


def test_a_clock_that_jumps_back_stops_it(tmp_path: Path) -> None:
    """Two runs in one file: exit 4, as in a log that is read whole."""
    columns = made()
    columns["t"] = np.concatenate([columns["t"][:25_000], columns["t"][:15_000]])
    with pytest.raises(RecordError, match="clock runs backwards"):
        read(tmp_path, columns)


def test_a_window_is_cut_out_before_the_blocks_are_made(tmp_path: Path) -> None:
    """From 10 s to 20 s: 10,000 samples in 5,000 blocks of two, and the command before them is known."""
    columns = made()
    record = read(tmp_path, columns, more='from = "10 s"\nto = "20 s"')
    assert "read by blocks of 2 samples" in kinds(record)
    assert len(record.run.time) == 5_000
    assert record.run.command_before == columns["u"][9_999]
    with pytest.raises(RequestError, match="the window holds no samples"):
        read(tmp_path, columns, more='from = "50 s"')


def test_a_rig_file_is_drafted_from_the_first_part(tmp_path: Path) -> None:
    """What a signal is shows there; roles are guessed as in a log that is read whole."""
    for write, name in ((written_hdf5, "run.h5"), (written_csv, "run.csv")):
        write(tmp_path / name, made())
        draft = draft_rig(tmp_path / name, tmp_path / "rig.toml")
        assert re.search(r'^command\s+= \{ source = "/?u"', draft, re.MULTILINE)
        assert re.search(r'^response\s+= \{ source = "/?y"', draft, re.MULTILINE)


def test_a_cut_out_of_a_large_log_is_known_wherever_it_begins(tmp_path: Path) -> None:
    """6,000 samples of it, at a place that no block begins at; another record of the same rig is not taken for one."""
    columns = made()
    large = read(tmp_path, columns)
    piece = {name: values[12_345:18_345] for name, values in columns.items()}
    assert shares_samples(large, read(tmp_path, piece))
    assert not shares_samples(large, read(tmp_path, made(6_000, seed=2)))
    assert not shares_samples(large, read(tmp_path, made(seed=2)))
