"""HDF5 as rigs leave it: growing under its writer, never closed, with filters, links and units that lead nowhere."""

import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import h5py
import numpy as np
import pytest
from gainwright.ident.errors import RecordError
from gainwright.io.readers.hdf5 import Hdf5Reader
from gainwright.io.readers.port import Hints
from gainwright.io.units import UnitError, require_known

SOURCES = ("time", "drive")

WRITER = """
import os, sys
import h5py, numpy as np
path, mode, end = sys.argv[1:]
file = h5py.File(path, "w", libver="earliest" if mode == "plain" else "latest")
sets = [file.create_dataset(name, (100,), maxshape=(None,), chunks=(64,), dtype="f8") for name in ("time", "drive")]
if mode == "swmr":
    file.swmr_mode = True
for each in sets:
    each[...] = np.arange(100.0)
if mode != "unflushed":
    file.flush()
print("written", flush=True)
if end == "killed":
    os.abort()
for word in sys.stdin:
    size = sets[0].shape[0]
    for each, more in zip(sets, (50, 30)):
        each.resize((size + more,))
        each[size:] = np.arange(size, size + more)
        each.flush()
    print("grown", flush=True)
"""


def writer(path: Path, mode: str, end: str) -> subprocess.Popen[str]:
    """A logger in a process of its own, once it has written 100 samples."""
    words = [sys.executable, "-P", "-c", WRITER, str(path), mode, end]
    started = subprocess.Popen(
        words, stdin=subprocess.PIPE, stdout=subprocess.PIPE, stderr=subprocess.DEVNULL, text=True
    )
    assert started.stdout is not None
    assert started.stdout.readline() == "written\n"
    return started


def test_a_growing_swmr_file_is_read_to_where_it_is_whole(tmp_path: Path) -> None:
    """Single writer, many readers: read twice while it grows; the channel that is behind decides, and it is said."""
    path = tmp_path / "run.h5"
    with writer(path, "swmr", "goes on") as logger:
        assert logger.stdin is not None
        assert logger.stdout is not None
        first = Hdf5Reader().read(path, SOURCES, Hints())
        logger.stdin.write("more\n")
        logger.stdin.flush()
        assert logger.stdout.readline() == "grown\n"
        second = Hdf5Reader().read(path, SOURCES, Hints())
        parts = list(Hdf5Reader().chunks(path, SOURCES, Hints(), 40))
        logger.stdin.close()
        assert logger.wait(30) == 0
    assert [len(log.channels["drive"].values) for log in (first, second)] == [100, 130]
    assert [finding.kind for finding in second.findings] == ["channels of unequal length"]
    np.testing.assert_array_equal(second.channels["time"].values, np.arange(130.0))
    np.testing.assert_array_equal(np.concatenate([log.channels["time"].values for log in parts]), np.arange(130.0))
    assert [finding.kind for log in parts for finding in log.findings] == ["channels of unequal length"]
    with h5py.File(path, "r") as file:
        assert file["time"].shape == (150,)


@pytest.mark.parametrize(
    ("mode", "samples"),
    [("plain", 100), ("swmr", 100), ("latest", None), ("unflushed", None)],
)
def test_a_file_whose_writer_died_is_read_or_refused_and_never_touched(
    mode: str, samples: int | None, tmp_path: Path
) -> None:
    """Flushed in the old form or under SWMR all samples are there; marked as open, or never flushed, it is refused."""
    path = tmp_path / "run.h5"
    with writer(path, mode, "killed") as logger:
        assert logger.wait(30) == -6
    before = path.read_bytes()
    if samples is None:
        with pytest.raises(RecordError, match="can't be opened"):
            Hdf5Reader().read(path, SOURCES, Hints())
    else:
        log = Hdf5Reader().read(path, SOURCES, Hints())
        np.testing.assert_array_equal(log.channels["drive"].values, np.arange(100.0))
    assert path.read_bytes() == before


def unknown_filter(file: h5py.File) -> None:
    """Written with a compression that is not on this machine: the chunk as its bytes, the filter by its number."""
    made = file.create_dataset("drive", (100,), chunks=(100,), dtype="f8", compression=32999, allow_unknown_filter=True)
    made.id.write_direct_chunk((0,), np.arange(100.0).tobytes())


def dangling(file: h5py.File) -> None:
    """A soft link to a dataset that was never written: it is in the group and yet not there."""
    file["drive"] = h5py.SoftLink("/raw/drive")


def dangling_external(file: h5py.File) -> None:
    """A link to a file that stayed on the rig."""
    file["drive"] = h5py.ExternalLink("left_behind.h5", "/drive")


def partly_virtual(file: h5py.File) -> None:
    """Half of it in this file, half in one that is missing and would read as zeros."""
    file["half"] = np.arange(50.0)
    layout = h5py.VirtualLayout(shape=(100,), dtype="f8")
    layout[:50] = h5py.VirtualSource(".", "half", shape=(50,))
    layout[50:] = h5py.VirtualSource("left_behind.h5", "half", shape=(50,))
    file.create_virtual_dataset("drive", layout)


REFUSED: dict[str, tuple[Callable[[h5py.File], None], str]] = {
    "unknown filter": (unknown_filter, r"compression filter is missing[\s\S]*32999"),
    "dangling link": (dangling, r"links to something that is not in it[\s\S]*/raw/drive"),
    "dangling external link": (dangling_external, "links to another file"),
    "half virtual": (partly_virtual, r"put together from other files[\s\S]*left_behind"),
}


@pytest.mark.parametrize("name", REFUSED)
def test_samples_that_are_not_there_are_never_made_up(name: str, tmp_path: Path) -> None:
    """Refused at once or by parts, with what is missing; the sound channels are listed and read all the same."""
    build, message = REFUSED[name]
    path = tmp_path / "run.h5"
    with h5py.File(path, "w") as file:
        file["time"] = np.arange(100.0)
        build(file)
    with pytest.raises(RecordError, match=message):
        Hdf5Reader().read(path, SOURCES, Hints())
    with pytest.raises(RecordError, match=message):
        list(Hdf5Reader().chunks(path, SOURCES, Hints(), 10))
    assert "/time" in [info.name for info in Hdf5Reader().channels(path, Hints())]
    assert len(Hdf5Reader().read(path, ["time"], Hints()).channels["time"].values) == 100


def test_a_virtual_dataset_over_its_own_file_is_read(tmp_path: Path) -> None:
    """Nothing outside is asked for."""
    path = tmp_path / "run.h5"
    with h5py.File(path, "w") as file:
        file["time"] = np.arange(100.0)
        file["raw"] = np.arange(100.0) ** 2
        layout = h5py.VirtualLayout(shape=(100,), dtype="f8")
        layout[:] = h5py.VirtualSource(".", "raw", shape=(100,))
        file.create_virtual_dataset("drive", layout)
    log = Hdf5Reader().read(path, SOURCES, Hints())
    np.testing.assert_array_equal(log.channels["drive"].values, np.arange(100.0) ** 2)


ODD_UNITS: dict[str, tuple[object, str | None]] = {
    "a number": (3.5, "3.5"),
    "an empty attribute": (h5py.Empty("S8"), None),
    "blanks": ("   ", None),
    "one of a list": (np.array(["V", "V"], dtype=h5py.string_dtype()), "V"),
    "an empty list": (np.array([], dtype="S4"), None),
    "broken UTF-8": (np.bytes_(b"\xb0C"), "\N{DEGREE SIGN}C"),
    "micro as UTF-8 bytes": (np.bytes_("µV".encode()), "µV"),
    "zero-padded": (np.array(b"mV\x00\x00\x00", dtype="S5"), "mV"),
}


@pytest.mark.parametrize("name", ODD_UNITS)
def test_an_odd_unit_is_read_as_text_or_as_not_stated(name: str, tmp_path: Path) -> None:
    """Never a crash, never a guess: what no table knows is refused where the unit is needed."""
    value, unit = ODD_UNITS[name]
    path = tmp_path / "run.h5"
    with h5py.File(path, "w") as file:
        file["drive"] = np.arange(10.0)
        file["drive"].attrs["units"] = value
    assert Hdf5Reader().read(path, ["drive"], Hints()).channels["drive"].unit == unit
    if unit == "3.5":
        with pytest.raises(UnitError):
            require_known(unit)
