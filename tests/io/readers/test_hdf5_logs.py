"""HDF5 logs: each scenario builds a small file and says what must be read from it, or refused."""

import os
import struct
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import h5py
import numpy as np
import pytest
from gainwright.ident.errors import RecordError, RequestError
from gainwright.io.readers import child, registry
from gainwright.io.readers.hdf5 import Hdf5Reader
from gainwright.io.readers.port import Hints

TIME = 0.01 * np.arange(50)
COMMAND = np.where(np.arange(50) < 10, 0.0, 2.0)
RESPONSE = np.sin(TIME)
SOURCES = ("time", "drive", "pos")


@dataclass(frozen=True)
class Scenario:
    """How a file is built, what is asked for, and the units that are found."""

    build: Callable[[h5py.File], None]
    sources: tuple[str, str, str] = SOURCES
    units: tuple[str | None, str | None, str | None] = (None, None, None)
    group: str | None = None
    rows: int = 50
    said: tuple[str, ...] = ()


def channels(place: str = "/", **units: object) -> Callable[[h5py.File], None]:
    """One dataset a channel, `units` attributes by channel name."""

    def build(file: h5py.File) -> None:
        for name, values in zip(SOURCES, (TIME, COMMAND, RESPONSE), strict=True):
            made = file.create_dataset(f"{place.rstrip('/')}/{name}", data=values)
            if name in units:
                made.attrs["units"] = units[name]

    return build


def table(file: h5py.File) -> None:
    """One compound table, its units an array with one entry a field."""
    rows = np.zeros(50, dtype=[("time", "<f8"), ("drive", ">f4"), ("pos", "<f8")])
    rows["time"], rows["drive"], rows["pos"] = TIME, COMMAND, RESPONSE
    made = file.create_dataset("daq/table", data=rows, compression="gzip", chunks=(16,))
    made.attrs["units"] = np.array([b"s", b"V", b"mm"], dtype="S8")


def matrix(file: h5py.File) -> None:
    """Columns of a matrix."""
    file["data"] = np.column_stack([TIME, COMMAND, RESPONSE])


def nexus(file: h5py.File) -> None:
    """Two NXlog groups with their own, equal clocks in ms."""
    for name, values in (("drive", COMMAND), ("pos", RESPONSE)):
        group = file.create_group(f"entry/{name}")
        group.attrs["NX_class"] = "NXlog"
        group["value"] = values
        group["time"] = np.arange(50)
        group["time"].attrs.update(units="ms", start="2026-11-03T10:00:00", scaling_factor=10.0)
        group["value"].attrs["units"] = "V" if name == "drive" else "mm"


def unequal(file: h5py.File) -> None:
    """A writer that was still running: the last channel is shorter."""
    channels()(file)
    del file["pos"]
    file["pos"] = RESPONSE[:48]


def linked(file: h5py.File) -> None:
    """Soft links inside the file are followed."""
    channels("/raw")(file)
    for name in SOURCES:
        file[name] = h5py.SoftLink(f"/raw/{name}")


def stamped(file: h5py.File) -> None:
    """Integer stamps in ns since 1970, too large for float64 to keep to the ns."""
    channels()(file)
    del file["time"]
    file["time"] = 1_700_000_000_123_456_789 + np.arange(50) * 10_000_000
    file["time"].attrs["units"] = "ns"


SCENARIOS: dict[str, Scenario] = {
    "one dataset a channel": Scenario(channels()),
    "absolute paths": Scenario(channels(), sources=("/time", "/drive", "/pos")),
    "in a group": Scenario(channels("/run_7"), group="/run_7"),
    "group without a slash": Scenario(channels("/run_7"), group="run_7/"),
    "units as text": Scenario(channels(time="s", drive="V", pos="mm"), units=("s", "V", "mm")),
    "units as bytes": Scenario(channels(time=np.bytes_("s"), drive=np.bytes_("V")), units=("s", "V", None)),
    "units as one-element arrays": Scenario(
        channels(time=np.array([b"s"], dtype="S8"), drive=np.array(["V"], dtype=h5py.string_dtype())),
        units=("s", "V", None),
    ),
    "units padded or empty": Scenario(
        channels(time="  s ", drive=np.bytes_(b"V\x00\x00"), pos=""), units=("s", "V", None)
    ),
    "units in latin-1": Scenario(
        channels(pos=np.array([b"\xb5m"], dtype="S4")), units=(None, None, "\N{MICRO SIGN}m")
    ),
    "table": Scenario(table, sources=("daq/table/time", "daq/table/drive", "daq/table/pos"), units=("s", "V", "mm")),
    "table with a colon": Scenario(table, sources=("daq/table:time", "daq/table:drive", "daq/table:pos"),
                                   units=("s", "V", "mm")),
    "table as the group": Scenario(table, group="/daq", sources=("table/time", "table/drive", "table/pos"),
                                   units=("s", "V", "mm")),
    "matrix": Scenario(matrix, sources=("data/1", "data/2", "data/3")),
    "NXlog": Scenario(nexus, sources=("entry/drive/time", "entry/drive", "entry/pos"), units=("ms", "V", "mm")),
    "NXlog by its value": Scenario(nexus, sources=("entry/pos/time", "entry/drive/value", "entry/pos/value"),
                                   units=("ms", "V", "mm")),
    "soft links": Scenario(linked),
    "unequal lengths": Scenario(unequal, rows=48, said=("channels of unequal length",)),
}  # fmt: skip


@pytest.mark.parametrize("name", SCENARIOS)
def test_a_file_is_read_as_it_was_meant(name: str, tmp_path: Path) -> None:
    """Samples, units and findings of each scenario; the file's bytes stay."""
    scenario = SCENARIOS[name]
    path = tmp_path / "run.h5"
    with h5py.File(path, "w") as file:
        scenario.build(file)
    before = path.read_bytes()
    log = registry.reader_of(path).read(path, scenario.sources, Hints(group=scenario.group))
    time, command, response = (log.channels[source] for source in scenario.sources)
    scale = 1000.0 if time.unit == "ms" else 1.0
    np.testing.assert_allclose(time.values / scale, TIME[: scenario.rows], rtol=1e-15, atol=1e-15)  # 10 * k / 1000
    np.testing.assert_array_equal(command.values, COMMAND[: scenario.rows])
    np.testing.assert_array_equal(response.values, RESPONSE[: scenario.rows])
    assert (time.unit, command.unit, response.unit) == scenario.units
    assert tuple(finding.kind for finding in log.findings) == scenario.said
    assert path.read_bytes() == before


def test_nexus_logs_bring_their_own_clock(tmp_path: Path) -> None:
    """NXlog times in ms with a scaling factor of 10 arrive in s."""
    path = tmp_path / "run.nxs"
    with h5py.File(path, "w") as file:
        nexus(file)
    clock = Hdf5Reader().read(path, ["entry/pos"], Hints()).channels["entry/pos"].clock
    assert clock is not None
    np.testing.assert_allclose(clock, TIME, rtol=1e-15, atol=1e-15)


def test_stamps_in_ns_keep_their_differences(tmp_path: Path) -> None:
    """float64 would round 1.7e18 ns to 256 ns; the differences come out exactly."""
    path = tmp_path / "run.h5"
    with h5py.File(path, "w") as file:
        stamped(file)
    time = Hdf5Reader().read(path, ["time"], Hints()).channels["time"].values
    np.testing.assert_array_equal(np.diff(time), 1e7)


def test_every_channel_is_listed_with_unit_and_length(tmp_path: Path) -> None:
    """Tables by field, matrices by column, NXlog by its value."""
    path = tmp_path / "run.h5"
    with h5py.File(path, "w") as file:
        table(file)
        matrix(file)
        nexus(file)
        file["note"] = "not a channel"
        file["scalar"] = 3.0
    infos = Hdf5Reader().channels(path, Hints())
    named = {info.name: (info.unit, info.samples) for info in infos}
    assert named["/daq/table/pos"] == ("mm", 50)
    assert named["/data/3"] == (None, 50)
    assert named["/entry/pos/value"] == ("mm", 50)
    assert not {"/note", "/scalar"} & named.keys()


def outside(file: h5py.File) -> None:
    """External link to another file."""
    channels()(file)
    del file["pos"]
    file["pos"] = h5py.ExternalLink("/etc/hostname", "/pos")


def raw_outside(file: h5py.File) -> None:
    """Samples in a raw file outside."""
    channels()(file)
    del file["pos"]
    file.create_dataset("pos", shape=(50,), dtype="f8", external=[("/etc/hostname", 0, h5py.h5f.UNLIMITED)])


def virtual(file: h5py.File) -> None:
    """A virtual dataset over a file that is not there would read as zeros."""
    channels()(file)
    del file["pos"]
    layout = h5py.VirtualLayout(shape=(50,), dtype="f8")
    layout[:] = h5py.VirtualSource("absent.h5", "pos", shape=(50,))
    file.create_virtual_dataset("pos", layout)


def loop(file: h5py.File) -> None:
    """A soft link onto itself."""
    channels()(file)
    del file["pos"]
    file["pos"] = h5py.SoftLink("/pos")


def wide(file: h5py.File) -> None:
    """A matrix where a channel was expected."""
    channels()(file)
    del file["pos"]
    file["pos"] = np.zeros((50, 3))


REFUSED: dict[str, tuple[Callable[[h5py.File], None], str]] = {
    "external link": (outside, "links to another file"),
    "raw external storage": (raw_outside, "keeps its samples in another file"),
    "virtual dataset": (virtual, "put together from other files"),
    "link in a circle": (loop, "round in circles"),
    "matrix without a column": (wide, "is not one channel"),
}


@pytest.mark.parametrize("name", REFUSED)
def test_what_would_read_other_files_is_refused(name: str, tmp_path: Path) -> None:
    """No path outside the log is opened, and no fill value passes for a sample."""
    build, message = REFUSED[name]
    path = tmp_path / "run.h5"
    with h5py.File(path, "w") as file:
        build(file)
    with pytest.raises(RecordError, match=message):
        Hdf5Reader().read(path, SOURCES, Hints())


def test_a_missing_source_or_group_is_answered_with_the_nearest(tmp_path: Path) -> None:
    """ "driv" is nearly "drive"; a group that isn't there is named."""
    path = tmp_path / "run.h5"
    with h5py.File(path, "w") as file:
        channels("/run_7")(file)
    with pytest.raises(RequestError, match=r'"driv"[\s\S]*did you mean "drive"'):
        Hdf5Reader().read(path, ["time", "driv"], Hints(group="run_7"))
    with pytest.raises(RequestError, match=r'"/run_8"[\s\S]*did you mean "/run_7"'):
        Hdf5Reader().read(path, ["time"], Hints(group="run_8"))


def test_a_truncated_file_is_refused(tmp_path: Path) -> None:
    """Half a copy still has the signature."""
    path = tmp_path / "run.h5"
    with h5py.File(path, "w") as file:
        file["time"] = np.arange(10000.0)
    path.write_bytes(path.read_bytes()[:20000])
    with pytest.raises(RecordError, match="can't be opened"):
        registry.reader_of(path).read(path, ["time"], Hints())


def test_a_live_writer_is_not_disturbed(tmp_path: Path) -> None:
    """The reader takes no lock: the writer opens the file again while it is being read."""
    path = tmp_path / "run.h5"
    with h5py.File(path, "w") as file:
        channels()(file)
        file.flush()
        log = Hdf5Reader().read(path, SOURCES, Hints())
        file["more"] = 1.0
    assert len(log.channels["pos"].values) == 50
    with h5py.File(path, "r") as file:
        assert "more" in file


def test_damaged_files_end_in_one_error(tmp_path: Path) -> None:
    """Twelve random overwrites of a few bytes: arrays or a RecordError, never anything else."""
    whole = tmp_path / "whole.h5"
    with h5py.File(whole, "w") as file:
        table(file)
        channels()(file)
    content = whole.read_bytes()
    rng = np.random.default_rng(11)
    for number in range(12):
        broken = bytearray(content)
        for place in rng.integers(8, min(len(content), 3000), size=6):
            broken[place] = rng.integers(256)
        path = tmp_path / f"broken_{number}.h5"
        path.write_bytes(bytes(broken))
        try:
            log = Hdf5Reader().read(path, SOURCES, Hints())
        except (RecordError, RequestError):
            continue
        assert set(log.channels) == set(SOURCES)


def test_a_hanging_or_crashing_child_is_one_error(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A child that sleeps is ended in time; one that dies is said with its exit code."""
    (tmp_path / "sleeps.py").write_text("import time\ntime.sleep(60)\n", encoding="utf-8")
    (tmp_path / "dies.py").write_text("import os\nos.abort()\n", encoding="utf-8")
    (tmp_path / "babbles.py").write_text("print('no json')\n", encoding="utf-8")
    monkeypatch.setenv("PYTHONPATH", os.pathsep.join([str(tmp_path)]))
    with pytest.raises(RecordError, match="takes too long"):
        child.ask_child("sleeps", {}, "a log", seconds=0.7)
    with pytest.raises(RecordError, match=r"crashed on it[\s\S]*exit -6"):
        child.ask_child("dies", {}, "a log")
    with pytest.raises(RecordError, match="gave no answer"):
        child.ask_child("babbles", {}, "a log")


def test_a_signature_behind_a_user_block_is_found() -> None:
    """The format allows 512, 1024, 2048 ... bytes in front."""
    signature = struct.pack("8B", 0x89, *b"HDF", 0x0D, 0x0A, 0x1A, 0x0A)
    assert Hdf5Reader().recognises(bytes(1024) + signature)
    assert not Hdf5Reader().recognises(bytes(100) + signature)
