"""Text logs: each scenario builds a small log and says what must be read from it."""

import stat
from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
import pytest
from gainwright.ident.errors import RecordError, RequestError
from gainwright.io.readers.csv import CsvReader
from gainwright.io.readers.port import Hints
from gainwright.io.readers.registry import reader_of
from gainwright.io.rigfile.rig import LogDialect

TIME = (0.0, 0.5, 1.0, 1.5, 2.0)
COMMAND = (0.0, 0.0, 1.25, 1.25, 1.25)
RESPONSE = (10.0, 10.125, 11.5, -12.0, 1500.0)


@dataclass(frozen=True)
class Scenario:
    """One log as bytes, and what must be read.

    Attributes
    ----------
    content : bytes
    names, units : of the columns
    sources : what is asked for, in the order time, command, response
    rows : how many samples remain
    said : kinds of the findings
    """

    content: bytes
    names: tuple[str, ...] = ("time", "drive", "pos")
    units: tuple[str | None, ...] = (None, None, None)
    sources: tuple[str, ...] = ("time", "drive", "pos")
    rows: int = 5
    said: tuple[str, ...] = ()
    dialect: LogDialect = field(default_factory=LogDialect)
    response: tuple[float, ...] = RESPONSE


def body(
    separator: str = ",", decimal: str = ".", end: str = "", line: str = "\n", show: Callable[[float], str] = repr
) -> str:
    """The five rows of samples as text."""
    rows = zip(TIME, COMMAND, RESPONSE, strict=True)
    return "".join(separator.join(show(value).replace(".", decimal) for value in row) + end + line for row in rows)


HEAD = "time,drive,pos\n"
BRACKETS = {"units": ("s", "V", "mm")}
SCENARIOS: dict[str, Scenario] = {
    "plain": Scenario((HEAD + body()).encode()),
    "semicolon and decimal comma": Scenario(("time;drive;pos\n" + body(";", ",")).encode()),
    "tab and decimal comma": Scenario(("time\tdrive\tpos\n" + body("\t", ",")).encode()),
    "blanks": Scenario(("time drive pos\n" + body("   ")).encode()),
    "aligned with blanks in front": Scenario(
        (
            "  time drive pos\n"
            + "".join(f"  {t:8.3f}  {u:8.3f}  {y:9.4f}\n" for t, u, y in zip(TIME, COMMAND, RESPONSE, strict=True))
        ).encode()
    ),
    "pipe": Scenario(("time|drive|pos\n" + body("|")).encode()),
    "comma and blank": Scenario(("time, drive, pos\n" + body(", ")).encode()),
    "quoted fields with decimal comma": Scenario(
        ('"time","drive","pos"\n' + body(",", ",", show=lambda v: f'"{v!r}"')).encode()
    ),
    "CRLF": Scenario(("time,drive,pos\r\n" + body(line="\r\n")).encode()),
    "CR alone": Scenario(("time,drive,pos\r" + body(line="\r")).encode()),
    "UTF-8 mark": Scenario(b"\xef\xbb\xbf" + (HEAD + body()).encode()),
    "UTF-16 with mark": Scenario((HEAD + body()).encode("utf-16")),
    "UTF-16 without mark": Scenario((HEAD + body()).encode("utf-16-le")),
    "units in square brackets": Scenario(("time [s],drive [V],pos [mm]\n" + body()).encode(), **BRACKETS),
    "units in round brackets": Scenario(("time (s),drive (V),pos (mm)\n" + body()).encode(), **BRACKETS),
    "units after a slash": Scenario(("time / s;drive / V;pos / mm\n" + body(";")).encode(), **BRACKETS),
    "round brackets that hold no unit": Scenario(
        ("time,drive (raw),pos\n" + body()).encode(),
        names=("time", "drive (raw)", "pos"),
        sources=("time", "drive (raw)", "pos"),
    ),
    "asked for with the unit": Scenario(
        ("time [s],drive [V],pos [mm]\n" + body()).encode(), sources=("time [s]", "drive", "pos [mm]"), **BRACKETS
    ),
    "blanks and units in brackets": Scenario(("time [s]  drive [V]  pos [mm]\n" + body("  ")).encode(), **BRACKETS),
    "units row": Scenario((HEAD + "s,V,mm\n" + body()).encode(), **BRACKETS),
    "units row in brackets": Scenario((HEAD + "[s],[V],[mm]\n" + body()).encode(), **BRACKETS),
    "micro sign in cp1252": Scenario(
        ("time [s];drive [V];pos [\N{MICRO SIGN}m]\n" + body(";")).encode("cp1252"), units=("s", "V", "\N{MICRO SIGN}m")
    ),
    "degree sign in UTF-8": Scenario(("time [s];drive [V];pos [°C]\n" + body(";")).encode(), units=("s", "V", "°C")),
    "hash in a header": Scenario(
        ("time,Motor #2 (rpm),pos\n" + body()).encode(),
        names=("time", "Motor #2", "pos"),
        units=(None, "rpm", None),
        sources=("time", "Motor #2", "pos"),
    ),
    "preamble": Scenario(
        ("Rig: paddle\nOperator;me;yes\nRate;2\n\n" + "time;drive;pos\ns;V;mm\n" + body(";", ",")).encode(), **BRACKETS
    ),
    "commented preamble and header": Scenario(("# made by a logger\n# time drive pos\n" + body(" ")).encode()),
    "comments among the samples": Scenario((HEAD + body().replace("\n1.0,", "\n# stopped here\n\n1.0,")).encode()),
    "preamble with a number": Scenario(("rate,1000\nchannels,3\ntime,drive,pos\n" + body()).encode()),
    "no header": Scenario(body().encode(), names=("1", "2", "3"), sources=("1", "2", "3")),
    "columns by number": Scenario((HEAD + body()).encode(), sources=("1", "2", "3")),
    "trailing separator on samples only": Scenario((HEAD + body(end=",")).encode()),
    "trailing separator everywhere": Scenario(("time;drive;pos;\n" + body(";", ",", end=";")).encode()),
    "an empty last channel": Scenario(
        ("time,drive,pos,spare\n" + body(end=",")).encode(), names=("time", "drive", "pos", "spare"), units=(None,) * 4
    ),
    "a text column": Scenario(
        ("time,drive,pos,state\n" + body(end=",running")).encode(),
        names=("time", "drive", "pos", "state"),
        units=(None,) * 4,
    ),
    "partial last line": Scenario((HEAD + body() + "2.5,1.2").encode(), said=("partial last line",)),
    "last number cut": Scenario((HEAD + body() + "2.5,1.25,150").encode(), said=("partial last line",)),
    "text under the samples": Scenario(
        (HEAD + body() + "end of log\nsum: 5\n").encode(), said=("text under the samples",)
    ),
    "zero bytes at the end": Scenario((HEAD + body()).encode() + bytes(64), said=("zero bytes",)),
    "words for lost samples": Scenario(
        (HEAD + body().replace("10.125", "OL").replace("11.5", "1.#INF").replace("-12.0", "")).encode(),
        response=(10.0, np.nan, np.nan, np.nan, 1500.0),
    ),
    "a word that the rig file knows": Scenario(
        (HEAD + body().replace("11.5", "open loop")).encode(),
        dialect=LogDialect(not_a_number=("open loop",)),
        response=(10.0, 10.125, np.nan, -12.0, 1500.0),
    ),
    "whole numbers first, decimal commas later": Scenario(
        ("time;drive;pos\n" + "".join(f"{k};0;{k}\n" for k in range(700)) + "700;0;700,5\n").encode(), rows=701
    ),
    "ISO stamps": Scenario(
        (
            "time,drive,pos\n"
            + "".join(
                f"2026-11-03T23:59:{58 + t:06.3f},{u},{y}\n" if t < 2 else f"2026-11-04T00:00:00.000,{u},{y}\n"
                for t, u, y in zip(TIME, COMMAND, RESPONSE, strict=True)
            )
        ).encode(),
        units=("s", None, None),
    ),
    "ISO stamps with an offset": Scenario(
        (
            "time;drive;pos\n"
            + "".join(
                f"2026-11-03 10:00:{t:04.1f}+01:00;{u};{y}\n" for t, u, y in zip(TIME, COMMAND, RESPONSE, strict=True)
            )
        ).encode(),
        units=("s", None, None),
    ),
    "clock times over midnight": Scenario(
        (
            "time;drive;pos\n"
            + "".join(
                f"{'23:59:' if t < 1 else '00:00:'}{(59 + t) % 60:04.1f};{u};{y}\n"
                for t, u, y in zip(TIME, COMMAND, RESPONSE, strict=True)
            ).replace(".", ",")
        ).encode(),
        units=("s", None, None),
    ),
    "header row and first row given": Scenario(
        ("1,2,3\ntime,drive,pos\n9,9,9\n" + body()).encode(), dialect=LogDialect(header_row=2, first_row=4)
    ),
    "separator given": Scenario(
        (HEAD + body()).encode(), dialect=LogDialect(separator=",", decimal=".", encoding="ascii")
    ),
}


@pytest.mark.parametrize("name", SCENARIOS)
def test_a_log_is_read_as_it_was_meant(name: str, tmp_path: Path) -> None:
    """Names, units, samples and findings of each scenario; the file is not changed and may be read-only."""
    scenario = SCENARIOS[name]
    file = tmp_path / "run.csv"
    file.write_bytes(scenario.content)
    file.chmod(stat.S_IREAD)
    hints = Hints(scenario.dialect)
    reader = reader_of(file)
    assert isinstance(reader, CsvReader)
    infos = reader.channels(file, hints)
    assert tuple(info.name for info in infos) == scenario.names
    stated = (None, *scenario.units[1:]) if "ISO" in name or "clock" in name else scenario.units
    assert tuple(info.unit for info in infos) == stated
    log = reader.read(file, scenario.sources, hints)
    assert tuple(finding.kind for finding in log.findings) == scenario.said
    time, command, response = (log.channels[source].values for source in scenario.sources)
    assert len(time) == len(command) == len(response) == scenario.rows
    if scenario.rows == len(TIME):
        np.testing.assert_array_equal(time, TIME)  # decimal texts read to the nearest float64: exact
        np.testing.assert_array_equal(command, COMMAND)
        np.testing.assert_array_equal(response, scenario.response)
    else:
        assert response[-1] == 700.5
    assert tuple(log.channels[source].unit for source in scenario.sources) == scenario.units[:3]
    assert file.read_bytes() == scenario.content


BROKEN: dict[str, tuple[bytes, str]] = {
    "a row with too few fields": ((HEAD + body().replace("1.0,1.25,", "1.0,")).encode(), r"line 4[\s\S]*2 fields"),
    "a row with too many fields": (
        (HEAD + body().replace("1.0,1.25,", "1.0,1.25,7,")).encode(),
        r"line 4[\s\S]*4 fields",
    ),
    "fewer names than columns": (("time,drive\n" + body()).encode(), r"line 1[\s\S]*different numbers of columns"),
    "a word that nobody knows": ((HEAD + body().replace("11.5", "abc")).encode(), r'line 4, column "pos"[\s\S]*"abc"'),
    "separated thousands": (
        ("time;drive;pos\n" + body(";").replace("1500.0", "1.500,0")).encode(),
        r"line 6[\s\S]*thousands",
    ),
    "no numbers": (b"just\nwords\nhere\n", r"no rows of numbers"),
    "header only": (HEAD.encode(), r"no rows of numbers"),
    "empty": (b"", r"the log is empty"),
    "dates in two orders": (
        ("time,drive,pos\n" + "".join(f"0{k}/02/2024 10:00:00,{k},{k}\n" for k in range(1, 6))).encode(),
        r"two ways",
    ),
}


@pytest.mark.parametrize("name", BROKEN)
def test_a_broken_log_is_refused_with_its_line(name: str, tmp_path: Path) -> None:
    """File and line are in the message."""
    content, message = BROKEN[name]
    file = tmp_path / "run.csv"
    file.write_bytes(content)
    with pytest.raises(RecordError, match=message) as caught:
        reader_of(file).read(file, ["time", "drive", "pos"], Hints())
    assert "run.csv" in caught.value.text


def test_a_missing_source_is_answered_with_the_nearest(tmp_path: Path) -> None:
    """The rig file asked for "driv"."""
    file = tmp_path / "run.csv"
    file.write_text(HEAD + body(), encoding="utf-8")
    with pytest.raises(RequestError, match=r'"driv"[\s\S]*did you mean "drive"'):
        CsvReader().read(file, ["driv"], Hints())


def test_two_columns_of_one_name_need_a_number(tmp_path: Path) -> None:
    """By name it is ambiguous, by number it is not."""
    file = tmp_path / "run.csv"
    file.write_text("time,pos,pos\n" + body(), encoding="utf-8")
    with pytest.raises(RequestError, match=r"same name[\s\S]*channels 2 and 3"):
        CsvReader().read(file, ["pos"], Hints())
    log = CsvReader().read(file, ["2", "3"], Hints())
    np.testing.assert_array_equal(log.channels["3"].values, RESPONSE)


def test_content_comes_before_the_suffix(tmp_path: Path) -> None:
    """A text log named .h5 is read as text; an unreadable path is said."""
    file = tmp_path / "run.h5"
    file.write_text(HEAD + body(), encoding="utf-8")
    assert isinstance(reader_of(file), CsvReader)
    with pytest.raises(RecordError, match="can't be opened"):
        reader_of(tmp_path / "absent.csv")
    noise = tmp_path / "run.bin"
    noise.write_bytes(b"\x01\x02\x03\xff" * 16 + bytes(64))
    with pytest.raises(RecordError, match="no reader knows"):
        reader_of(noise)
