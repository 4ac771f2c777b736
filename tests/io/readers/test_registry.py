"""The door for readers: built-in ones and outside ones come through one entry-point group."""

from collections.abc import Sequence
from importlib.metadata import EntryPoint
from pathlib import Path

import numpy as np
import pytest
from gainwright.ident.errors import GainwrightError
from gainwright.io.readers import registry
from gainwright.io.readers.port import Channel, ChannelInfo, Hints, Log, Reader


class WordReader:
    """A whole outside reader: a file of float32 samples behind the word RIGLOG, 100 Hz."""

    name = "riglog"
    suffixes = (".riglog",)

    def recognises(self, head: bytes) -> bool:
        """By the word at the start."""
        return head.startswith(b"RIGLOG")

    def channels(self, file: Path, hints: Hints) -> tuple[ChannelInfo, ...]:
        """One channel."""
        return (ChannelInfo("pos", "mm"),)

    def read(self, file: Path, sources: Sequence[str], hints: Hints) -> Log:
        """Its samples."""
        values = np.frombuffer(file.read_bytes()[6:], dtype="<f4").astype(np.float64)
        return Log({source: Channel(source, values, "mm") for source in sources})


@pytest.fixture
def installed(monkeypatch: pytest.MonkeyPatch):
    """Pretend that these entry points are installed, and forget them afterwards."""

    def install(**targets: str) -> None:
        points = [EntryPoint(name, target, registry.GROUP) for name, target in targets.items()]
        monkeypatch.setattr(registry, "entry_points", lambda group: [p for p in points if p.group == group])
        registry.readers.cache_clear()

    yield install
    registry.readers.cache_clear()


def test_the_built_in_readers_come_through_the_entry_points() -> None:
    """As installed: each fitting the port, the one that takes any text last."""
    names = [reader.name for reader in registry.readers()]
    assert names == ["HDF5", "ASAM MDF", "Parquet", "universal file format 58", "text with columns (CSV)"]
    assert all(isinstance(reader, Reader) for reader in registry.readers())


def test_an_outside_reader_is_chosen_by_content(installed, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Its file is read before the text reader looks, whatever the suffix; the suffix decides where nothing is known."""
    (tmp_path / "outside_reader.py").write_text("Riglog = None\n", encoding="utf-8")
    monkeypatch.syspath_prepend(str(tmp_path))
    import outside_reader

    outside_reader.Riglog = WordReader
    installed(zz_riglog="outside_reader:Riglog", csv="gainwright.io.readers.csv:CsvReader")
    file = tmp_path / "run.csv"
    file.write_bytes(b"RIGLOG" + np.frombuffer(b"1,2\n" * 5, dtype="<f4").tobytes())
    reader = registry.reader_of(file)
    assert reader.name == "riglog"
    np.testing.assert_array_equal(
        reader.read(file, ["pos"], Hints()).channels["pos"].values, np.frombuffer(b"1,2\n" * 5, "<f4")
    )
    other = tmp_path / "run.riglog"
    other.write_bytes(b"\x00\x01\x02\x03" * 9)
    assert registry.reader_of(other).name == "riglog"


@pytest.mark.parametrize(("target", "message"), [
    ("no_such_module:Reader", "can't be loaded"),
    ("gainwright.io.readers.csv:NoSuchReader", "can't be loaded"),
    ("gainwright.io.readers.port:Hints", "doesn't fit the port"),
])  # fmt: skip
def test_a_broken_outside_reader_is_named(installed, target: str, message: str) -> None:
    """The entry point is said, so that people know what to uninstall."""
    installed(broken=target)
    with pytest.raises(GainwrightError, match=f'"broken"[\\s\\S]*{message}'):
        registry.readers()
