"""MDF, universal files and Parquet through the same door: small files made with the libraries of the extras."""

import warnings
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from gainwright.ident.errors import RecordError, RequestError
from gainwright.io.inspection import inspect_log
from gainwright.io.plugin.folder import looks_finished
from gainwright.io.readers import registry
from gainwright.io.readers.mdf import MdfReader
from gainwright.io.readers.parquet import ParquetReader
from gainwright.io.readers.port import ChunkedReader, Hints
from gainwright.io.readers.uff import UffReader

TIME = 0.01 * np.arange(50)
DRIVE = np.where(np.arange(50) < 10, 0.0, 2.0)
POS = np.sin(TIME)


def mdf(path: Path, version: str = "4.10") -> None:
    """Drive and position in one group, the time of another rate in a second one, where "pos" stands again."""
    asammdf = pytest.importorskip("asammdf", reason="the extra 'mdf' is not installed")
    with asammdf.MDF(version=version) as made:
        first = [asammdf.Signal(DRIVE, TIME, name="drive", unit="V"), asammdf.Signal(POS, TIME, name="pos", unit="mm")]
        made.append(first)
        made.append([asammdf.Signal(POS[:20], 2.0 * TIME[:20], name="pos", unit="furlong")])
        saved = made.save(path, overwrite=True)
    Path(saved).replace(path)


def uff(path: Path, binary: int = 0, **changes: Any) -> None:
    """Two time responses; what is said of forces and lengths is left at zero."""
    pyuff = pytest.importorskip("pyuff", reason="the extra 'uff' is not installed")
    sets = [time_response(pyuff, "drive", "V", DRIVE, binary), time_response(pyuff, "pos", "mm", POS, binary)]
    path.unlink(missing_ok=True)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", ResourceWarning)  # the writer of binary sets leaves its file to the collector
        pyuff.UFF(str(path)).write_sets([{**each, **changes} for each in sets], mode="add")


def time_response(pyuff: Any, name: str, unit: str, values: np.ndarray, binary: int) -> dict[str, Any]:
    """One dataset 58 with every key that the writer wants."""
    axes = ("abscissa", "ordinate", "orddenom", "z_axis")
    parts = ("spec_data_type", "len_unit_exp", "force_unit_exp", "temp_unit_exp")
    exponents = {f"{axis}_{part}": 0 for axis in axes for part in parts}
    labels = {"abscissa_axis_units_lab": "s", "ordinate_axis_units_lab": unit, "orddenom_axis_units_lab": "NONE",
              "z_axis_axis_units_lab": "NONE"}  # fmt: skip
    return {
        "type": 58, "binary": binary, "func_type": 1, "ver_num": 0, "load_case_id": 0, "z_axis_value": 0.0,
        "id1": name, "id2": "NONE", "id3": "NONE", "id4": "NONE", "id5": "NONE",
        "rsp_ent_name": "NONE", "rsp_node": 3, "rsp_dir": 1, "ref_ent_name": "NONE", "ref_node": 0, "ref_dir": 0,
        "ord_data_type": 4, "num_pts": len(values), "abscissa_spacing": 1, "abscissa_min": 0.0, "abscissa_inc": 0.01,
        "x": TIME, "data": values, **exponents, **labels, "abscissa_spec_data_type": 17,
    }  # fmt: skip


def parquet(path: Path, **more: Any) -> None:
    """Three columns, the units in the metadata of their fields, row groups of 16."""
    arrow = pytest.importorskip("pyarrow", reason="the extra 'parquet' is not installed")
    pq = pytest.importorskip("pyarrow.parquet")
    kept = {"t": ("s", TIME), "drive": ("V", DRIVE.astype("float32")), "pos": ("mm", POS), **more}
    fields = [
        arrow.field(name, arrow.array(values).type, metadata={"unit": unit} if unit else None)
        for name, (unit, values) in kept.items()
    ]
    table = arrow.table([arrow.array(values) for _, values in kept.values()], schema=arrow.schema(fields))
    pq.write_table(table, path, row_group_size=16)


MADE: dict[str, tuple[Callable[[Path], None], str, tuple[str, str]]] = {
    "MDF 4": (mdf, "ASAM MDF", ("drive", "1/pos")),
    "MDF 3": (lambda path: mdf(path, "3.30"), "ASAM MDF", ("drive", "1/pos")),
    "universal text": (uff, "universal file format 58", ("drive", "pos")),
    "universal binary": (lambda path: uff(path, 1), "universal file format 58", ("1", "2")),
    "Parquet": (parquet, "Parquet", ("drive", "pos")),
}


@pytest.mark.parametrize("name", MADE)
def test_a_log_is_known_by_its_content_and_read_with_its_units(name: str, tmp_path: Path) -> None:
    """Under a suffix that says nothing; samples, units and own clocks as written; the bytes stay."""
    build, reader_name, sources = MADE[name]
    path = tmp_path / "run.bin"
    build(path)
    before = path.read_bytes()
    reader = registry.reader_of(path)
    assert reader.name == reader_name
    log = reader.read(path, sources, Hints())
    drive, pos = (log.channels[source] for source in sources)
    np.testing.assert_array_equal(drive.values, DRIVE)
    np.testing.assert_allclose(pos.values, POS, rtol=1e-9, atol=1e-9)  # the text form keeps 11 digits
    assert (drive.unit, pos.unit) == ("V", "mm")
    if name != "Parquet":
        assert pos.clock is not None
        np.testing.assert_allclose(pos.clock, TIME, rtol=0.0, atol=1e-9)
    assert path.read_bytes() == before


@pytest.mark.parametrize("name", ["MDF 4", "Parquet"])
def test_parts_make_up_the_whole(name: str, tmp_path: Path) -> None:
    """Twelve samples at a time: the same values, and the same times, as at once."""
    build, _, sources = MADE[name]
    path = tmp_path / "run.bin"
    build(path)
    reader = registry.reader_of(path)
    assert isinstance(reader, ChunkedReader)
    assert reader.rows(path, sources, Hints()) == 50
    whole = reader.read(path, sources, Hints()).channels
    parts = [log.channels for log in reader.chunks(path, sources, Hints(), 12)]
    assert max(len(part[sources[0]].values) for part in parts) <= 12
    for source in sources:
        np.testing.assert_array_equal(np.concatenate([part[source].values for part in parts]), whole[source].values)
        if whole[source].clock is not None:
            clocks = [part[source].clock for part in parts]
            np.testing.assert_array_equal(np.concatenate(clocks), whole[source].clock)


def test_channels_of_one_name_are_told_apart_by_their_group(tmp_path: Path) -> None:
    """The second group's position has its own length, time and unit, which no table knows."""
    path = tmp_path / "run.mf4"
    mdf(path)
    infos = {info.name: info for info in MdfReader().channels(path, Hints())}
    assert {"1/pos", "2/pos", "drive"} < set(infos)
    assert (infos["2/pos"].unit, infos["2/pos"].samples) == ("furlong", 20)
    log = MdfReader().read(path, ["drive", "2/pos"], Hints())
    assert [finding.kind for finding in log.findings] == ["channels of unequal length"]
    shown = inspect_log(path).text
    assert "furlong" in shown
    assert "time of drive: rises by 0.01" in shown


def test_dates_nulls_and_whole_numbers_of_a_table(tmp_path: Path) -> None:
    """Timestamps become ns from the first one without rounding, nulls are lost samples, integers are numbers."""
    path = tmp_path / "run.parquet"
    stamps = np.datetime64("2026-11-03T10:00:00.123456789") + np.arange(50) * np.timedelta64(10_000_000, "ns")
    holes: list[float | None] = [1.0] * 50
    holes[7] = None
    parquet(path, when=(None, stamps), holes=("V", holes), ticks=("ms", np.arange(50) * 10))
    asked = ["when", "holes", "ticks"]
    log = ParquetReader().read(path, asked, Hints()).channels
    np.testing.assert_array_equal(log["when"].values, 1e7 * np.arange(50))
    assert (log["when"].unit, log["ticks"].unit) == ("ns", "ms")
    assert np.flatnonzero(np.isnan(log["holes"].values)).tolist() == [7]
    parts = [part.channels["when"].values for part in ParquetReader().chunks(path, asked, Hints(), 12)]
    np.testing.assert_array_equal(np.concatenate(parts), 1e7 * np.arange(50))


def test_a_universal_file_without_names_or_time_says_so(tmp_path: Path) -> None:
    """Nameless sets are named by their response; a spectrum is no log; a file without its end was cut off."""
    path = tmp_path / "run.uff"
    uff(path, id1="NONE")
    assert [info.name for info in UffReader().channels(path, Hints())] == [
        "node 3 direction 1 #1", "node 3 direction 1 #2"
    ]  # fmt: skip
    uff(path, func_type=4)
    with pytest.raises(RecordError, match="holds no time response"):
        UffReader().channels(path, Hints())
    uff(path)
    path.write_bytes(path.read_bytes()[:-90])
    with pytest.raises(RecordError, match="was cut off"):
        UffReader().channels(path, Hints())


@pytest.mark.parametrize("name", ["MDF 4", "universal binary", "Parquet"])
def test_a_cut_or_damaged_file_ends_in_one_error(name: str, tmp_path: Path) -> None:
    """Nearly half a file, and six bytes overwritten at places drawn: samples or an error in words, nothing else."""
    build, _, sources = MADE[name]
    path = tmp_path / "run.bin"
    build(path)
    reader, content = registry.reader_of(path), path.read_bytes()
    path.write_bytes(content[: len(content) // 2 - 40])  # not between two sets, where a cut leaves a whole file
    with pytest.raises(RecordError):
        reader.read(path, sources, Hints())
    generator = np.random.default_rng(5)
    broken = bytearray(content)
    for place in generator.integers(8, len(content), size=6):
        broken[place] = generator.integers(256)
    path.write_bytes(bytes(broken))
    try:
        log = reader.read(path, sources, Hints())
    except (RecordError, RequestError):
        return
    assert set(log.channels) == set(sources)


@pytest.mark.parametrize(
    ("head", "reader", "extra"),
    [
        (b"MDF     4.10    ", MdfReader, "mdf"),
        (b"    -1\n    58\n", UffReader, "uff"),
        (b"PAR1" + bytes(20), ParquetReader, "parquet"),
    ],
)
def test_a_missing_library_is_one_error_that_names_the_extra(
    head: bytes, reader: type, extra: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """The file is known by its content all the same, so that nobody is told of a broken log (exit 4)."""
    path = tmp_path / "run.bin"
    path.write_bytes(head)
    monkeypatch.setattr(reader, "library", "no_such_library")
    found = registry.reader_of(path)
    assert isinstance(found, reader)
    with pytest.raises(RecordError, match=rf"needs the library[\s\S]*gainwright\[{extra}\]"):
        found.read(path, ["pos"], Hints())
    assert looks_finished(path)  # so that a watched folder says it rather than waiting for ever


@pytest.mark.parametrize("name", ["MDF 4", "universal text", "Parquet"])
def test_a_missing_channel_is_answered_with_the_nearest(name: str, tmp_path: Path) -> None:
    """ "driv" is nearly "drive"."""
    path = tmp_path / "run.bin"
    MADE[name][0](path)
    with pytest.raises(RequestError, match=r'"driv"[\s\S]*did you mean "drive"'):
        registry.reader_of(path).read(path, ["driv"], Hints())
