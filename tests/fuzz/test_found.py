"""What the fuzzer found, one named test each: a refusal in words where there was a traceback, a hang or a warning."""

import random
from pathlib import Path

import h5py
import numpy as np
import pytest
import rig_inputs
import text_inputs
from gainwright.ident.errors import RecordError, RequestError
from gainwright.io.drafting.draft import draft_rig
from gainwright.io.inspection import inspect_log
from gainwright.io.readers.port import Hints
from gainwright.io.readers.registry import reader_of
from gainwright.io.rigfile.load import load_rig
from gainwright.io.units import UnitError, difference_factor, read_quantity
from judged import judge
from kinds import KINDS


def with_value(key: str, value: str) -> bytes:
    """The sound rig file with every `key = ...` line of its own replaced."""
    lines = rig_inputs.SOUND.splitlines()
    assert any(line.startswith(f"{key} =") for line in lines)
    return "\n".join(f"{key} = {value}" if line.startswith(f"{key} =") else line for line in lines).encode()


def only_refused(folder: Path, content: bytes, code: int) -> None:
    """The commands end with this code, and the judge has nothing against it."""
    (verdict,) = KINDS["rigfile"].run(folder, content)
    assert (verdict.code, verdict.fault) == (code, None)


def refusal(folder: Path, content: bytes) -> str:
    """The text of the error with which the rig file is refused."""
    only_refused(folder, content, 2)
    with pytest.raises(RequestError) as caught:
        load_rig(folder / "rig.toml")
    return caught.value.text


@pytest.mark.parametrize(
    ("value", "says"), [("[" * 3000 + "]" * 3000, "nested too deep"), ("1" * 5000, "can't be read")]
)
def test_a_rig_file_that_the_toml_library_gives_up_on_is_refused(tmp_path: Path, value: str, says: str) -> None:
    """Lists thousands deep and numbers of thousands of digits ended in a RecursionError and a ValueError."""
    assert says in refusal(tmp_path, with_value("first_row", value))


@pytest.mark.parametrize("pattern", ['"**foo"', '"' + "x" * 5000 + '"', '"' + "?" * 300 + '"', r'"\u0000*"'])
def test_a_name_that_no_file_can_have_is_refused_with_its_key(tmp_path: Path, pattern: str) -> None:
    """The system's own refusal of a name or pattern came out as a traceback."""
    assert "runs[1].file" in refusal(tmp_path, with_value("file", pattern))


@pytest.mark.parametrize("encoding", ['"undefined"', r'"\u0000"', '"hex"', '"punycode"', '"idna"'])
def test_an_encoding_that_is_none_of_texts_is_refused(tmp_path: Path, encoding: str) -> None:
    """Some codecs refuse by other errors than the usual one."""
    verdicts = list(KINDS["rigfile"].run(tmp_path, with_value("encoding", encoding)))
    assert [verdict.fault for verdict in verdicts] == [None]


@pytest.mark.parametrize(
    "text", ["1 " + "m*" * 4000 + "m", "1 " + "(" * 3000 + "m", "1" * 8000 + " s", "1" + " " * 9000 + "x"]
)
def test_an_endless_quantity_is_refused_before_it_is_parsed(text: str) -> None:
    """Products of thousands of units ran out of stack."""
    with pytest.raises(UnitError, match="too long"):
        read_quantity(text)
    with pytest.raises(UnitError):
        difference_factor(text, "s")


@pytest.mark.parametrize(("key", "value"), [("scale", "1e308"), ("offset", "1e308")])
def test_readings_beyond_any_unit_are_refused(tmp_path: Path, key: str, value: str) -> None:
    """They overflowed in the looks at a log's health, and ended in a library's warning or a LinAlgError."""
    old = {"scale": "scale = 1.0", "offset": "offset = 0.0"}[key]
    only_refused(tmp_path, rig_inputs.SOUND.replace(old, f"{key} = {value}").encode(), 4)


def test_a_table_whose_magnitudes_overflow_is_refused(tmp_path: Path) -> None:
    """4e4 dB is no number any more, and came with a warning of numpy."""
    content = b"f,gain,phase,coherence\n" + b"".join(
        b"%d,%d,-10,0.9\n" % (k, 10 + 40000 * (k == 5)) for k in range(1, 12)
    )
    for turn in range(4):  # the rig file goes by the content
        verdicts = list(KINDS["table"].run(tmp_path, content + b"%d,10,-10,0.9\n" % (20 + turn)))
        assert [verdict.fault for verdict in verdicts] == [None]


@pytest.mark.parametrize("lost", ["", "NaT"])
def test_a_missing_date_is_refused(tmp_path: Path, lost: str) -> None:
    """It was read as -9.2e9 s, the smallest number of the library's own stamps, and nothing was said."""
    log = tmp_path / "log.csv"
    stamps = [f"2026-11-03T12:00:{k:02d}" if k != 5 else lost for k in range(12)]
    log.write_text("time,u\n" + "".join(f"{stamp},{k}\n" for k, stamp in enumerate(stamps)))
    with pytest.raises(RecordError, match="a stamp is missing") as caught:
        inspect_log(log)
    assert "line 7" in caught.value.where


def test_a_table_of_stamps_without_rows_is_refused(tmp_path: Path) -> None:
    """An HDF5 table with a field of texts and no row was an IndexError."""
    log = tmp_path / "log.h5"
    with h5py.File(log, "w") as file:
        file.create_dataset("table", data=np.zeros(0, [("t", "S8"), ("u", "f8")]))
    with pytest.raises(RecordError, match="empty"):
        inspect_log(log)


def test_a_clock_that_is_not_finite_comes_without_a_warning(tmp_path: Path) -> None:
    """The own clock of an NXlog held infinities, and their differences warned."""
    log = tmp_path / "log.h5"
    with h5py.File(log, "w") as file:
        file["log/value"] = np.arange(20.0)
        file["log/time"] = np.full(20, np.inf)
        file["log"].attrs["NX_class"] = "NXlog"
    verdicts = [judge(["inspect", str(log)], log.name)]
    assert [verdict.fault for verdict in verdicts] == [None]


def test_a_column_that_rises_beyond_any_time_comes_without_a_warning(tmp_path: Path) -> None:
    """The mean of two steps of 1e308 overflowed."""
    log = tmp_path / "log.csv"
    log.write_text("t,u\n-1e308,1\n0,2\n1e308,3\n")
    assert judge(["inspect", str(log)], log.name).fault is None


def test_a_time_with_a_single_stamp_comes_without_a_warning(tmp_path: Path) -> None:
    """The median step of no steps at all warned."""
    log = tmp_path / "log.csv"
    assert list(KINDS["csv"].run(tmp_path, b""))  # writes the rig file beside
    log.write_text("t,u,y\n1,2,3\n?,2,3\n?,2,4\n")
    verdict = judge(["inspect", str(log), "--rig", str(tmp_path / "as.toml")], log.name)
    assert (verdict.code, verdict.fault) == (4, None)


def test_a_draft_passes_over_columns_without_numbers(tmp_path: Path) -> None:
    """A log of many empty columns took one for the command, and its extremes don't exist."""
    log = tmp_path / "log.csv"
    log.write_text("t,u,y,z\n" + "".join(f"{k / 10},{k % 2},{k % 3},\n" for k in range(20)))
    drafted = draft_rig(log, tmp_path / "rig.toml")
    assert 'source = "u"' in drafted
    assert 'source = "z"' not in drafted
    log.write_text("t,u,y\n" + "".join(f"{k / 10},,{k % 3}\n" for k in range(20)))
    with pytest.raises(RecordError, match="doesn't hold a command and a response"):
        draft_rig(log, tmp_path / "rig.toml")


def test_a_damaged_hdf5_log_is_refused_at_once(tmp_path: Path) -> None:
    """It was opened a second time as if its writer were at work, and read again and again for a minute."""
    log = tmp_path / "log.h5"
    with h5py.File(log, "w", libver="latest") as file:
        for name in "abcdefgh":
            file.create_dataset(f"deep/{name}", data=np.arange(500.0), chunks=(50,))
    log.write_bytes(log.read_bytes()[:-2000])
    with pytest.raises(RecordError) as caught:
        reader_of(log).channels(log, Hints())
    assert "can't be opened" in caught.value.what
    assert "truncated" in caught.value.found


def test_very_many_columns_are_read_in_one_go(tmp_path: Path) -> None:
    """The log was read once for each of its columns: thousands of them took minutes."""
    log = tmp_path / "log.csv"
    log.write_bytes(b",".join([b"1"] * 1500) + b"\n" + b",".join([b"2"] * 1500) + b"\n")
    assert len(inspect_log(log).rows) == 1500
    assert judge(["inspect", str(log)], log.name).fault is None


def test_the_judge_sees_a_fault(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Else every input would pass: an escaped exception, an exit of 1, a hang, a refusal without its place."""
    log = tmp_path / "log.csv"
    log.write_bytes(text_inputs.sound(random.Random(1)))

    def escaped(file: Path) -> None:
        raise IndexError("list index out of range")

    def nameless(file: Path) -> None:
        raise RecordError("something is wrong")

    def endless(file: Path) -> None:
        while True:
            pass

    seen = []
    monkeypatch.setattr("judged.SECONDS", 0.2)
    for wrong in (escaped, nameless, endless):
        monkeypatch.setattr("gainwright.io.inspection.inspect_log", wrong)
        fault = judge(["inspect", str(log)], log.name).fault
        seen.append("" if fault is None else fault.key.split(":")[0].split(" in ")[0])
    assert seen == ["IndexError", "a refusal that names no place", "hang"]
