"""`gainwright draft`: from logs of many hands to rig files that load, with every guess marked."""

from pathlib import Path

import h5py
import numpy as np
import pytest
from gainwright.ident.errors import RecordError, RequestError
from gainwright.io.commands.main import main
from gainwright.io.drafting.draft import draft_rig, write_draft
from gainwright.io.rigfile.load import load_rig
from gainwright.io.rigfile.rig import Rig

COUNT, INTERVAL = 400, 0.05
TIME = INTERVAL * np.arange(COUNT)
COMMAND = np.select([TIME < 2.0, TIME < 8.0, TIME < 14.0], [2.0, 3.5, 1.0], 2.5)


def response() -> np.ndarray:
    """A lag of 0.5 s, 10 units a volt, a delay of two samples, noise of 0.05 units."""
    level, values = 20.0, []
    for wanted in np.concatenate([[2.0, 2.0], COMMAND[:-2]]):
        level += (10.0 * wanted - level) * INTERVAL / 0.5
        values.append(level)
    return np.array(values) + np.random.default_rng(4).normal(0.0, 0.05, COUNT)


RESPONSE = response()


def table(header: str, columns: list[np.ndarray], separator: str = ",", decimal: str = ".") -> str:
    """A text log."""
    rows = [separator.join(f"{cell:.10g}".replace(".", decimal) for cell in row) for row in zip(*columns, strict=True)]
    return "\n".join([header, *rows]) + "\n"


def drafted(folder: Path, text: str | bytes, name: str = "run_1.csv") -> tuple[Rig, str]:
    """The rig that the draft of this log loads as, and the draft's text."""
    log = folder / name
    log.write_bytes(text.encode() if isinstance(text, str) else text)
    rig_file = folder / "rig.toml"
    write_draft(draft_rig(log, rig_file), rig_file)
    return load_rig(rig_file), rig_file.read_text("utf-8")


def roles(rig: Rig) -> tuple[str | None, ...]:
    """Sources of time, command and response."""
    return tuple(rig.signals[role].source for role in ("time", "command", "response"))


NAMED = table("time_s,drive_V,position_mm", [TIME, COMMAND, RESPONSE])
# name of the case: (log, sources, units of time, command and response)
LOGS: dict[str, tuple[str, tuple[str, str, str], tuple[str, str, str]]] = {
    "units at the end of the names": (NAMED, ("time_s", "drive_V", "position_mm"), ("s", "V", "mm")),
    "units in brackets, response first": (
        table("Temperature [degC];Time [ms];Heater [%]", [RESPONSE, 1000.0 * TIME, COMMAND], ";", ","),
        ("Time", "Heater", "Temperature"), ("ms", "%", "degC")),
    "names that say nothing": (
        table("a,b,c", [TIME, RESPONSE, COMMAND]), ("a", "c", "b"), ("s", "1", "1")),
    "no header at all": (
        table("", [TIME, RESPONSE, COMMAND]).lstrip(), ("1", "3", "2"), ("s", "1", "1")),
    "a counter beside the time": (
        table("n,t,u,y", [np.arange(COUNT), TIME, COMMAND, RESPONSE]), ("t", "u", "y"), ("s", "1", "1")),
    "a second sensor that only makes noise": (
        table("t,valve,sensor_1,sensor_2", [TIME, COMMAND, np.random.default_rng(5).normal(size=COUNT), RESPONSE]),
        ("t", "valve", "sensor_2"), ("s", "1", "1")),
    "stamps in ms since 1970": (
        table("stamp,u,y", [np.round(1.7e12 + 1000.0 * TIME), COMMAND, RESPONSE]).replace("1.7e+12", "1700000000000"),
        ("stamp", "u", "y"), ("ms", "1", "1")),
    "output that means the response": (
        table("t,input,output", [TIME, COMMAND, RESPONSE]), ("t", "input", "output"), ("s", "1", "1")),
}  # fmt: skip


@pytest.mark.parametrize("name", LOGS)
def test_roles_and_units_are_guessed_and_the_draft_loads(name: str, tmp_path: Path) -> None:
    """By names, by units, and by which signal foretells the other; the drafted file is a rig file."""
    log, sources, units = LOGS[name]
    if name.startswith("stamps"):
        rows = zip(1700000000000 + np.round(1000.0 * TIME).astype(int), COMMAND, RESPONSE, strict=True)
        log = "stamp,u,y\n" + "".join(f"{t},{u:.6g},{y:.8g}\n" for t, u, y in rows)
    rig, _ = drafted(tmp_path, log)
    assert roles(rig) == sources
    assert (rig.signals["time"].unit, rig.command_unit, rig.response_unit) == units


def test_every_guess_is_marked_and_holds_the_job(tmp_path: Path) -> None:
    """Name, log, three signals, run, controller, requirements and limits are guesses."""
    rig, text = drafted(tmp_path, NAMED)
    assert set(rig.guessed) == {
        "rig", "log", "signals.time", "signals.command", "signals.response", "runs[1]", "controller", "requirements",
        "limits",
    }  # fmt: skip
    confirmed = tmp_path / "confirmed.toml"
    lines = [line.replace(", guessed = true", "") for line in text.splitlines() if line != "guessed = true"]
    confirmed.write_text("\n".join(lines), "utf-8")
    assert load_rig(confirmed).guessed == ()


def test_a_setpoint_is_known_by_its_name(tmp_path: Path) -> None:
    """Three signals, one of them called the target."""
    rig, _ = drafted(tmp_path, table("t,u,y,target", [TIME, COMMAND, RESPONSE, np.full(COUNT, 25.0)]))
    assert rig.signals["setpoint"].source == "target"


def test_a_mark_for_lost_samples_is_seen(tmp_path: Path) -> None:
    """-9999 among readings of 10 to 35 mm is no reading, and no limit."""
    spoiled = RESPONSE.copy()
    spoiled[[40, 41, 300]] = -9999.0
    rig, text = drafted(tmp_path, table("t,u,y", [TIME, COMMAND, spoiled]))
    assert rig.signals["response"].lost_as == (-9999.0,)
    assert rig.limits.response_lowest is not None
    assert rig.limits.response_lowest > 0.0
    assert "-9999 to" not in text


def test_a_unit_of_two_meanings_is_said(tmp_path: Path) -> None:
    """C is a charge, and on most rigs a temperature: the guess says both."""
    rig, text = drafted(tmp_path, table("t [s],u [V],y [C]", [TIME, COMMAND, RESPONSE]))
    assert rig.response_unit == "degC"
    assert "means two things" in text


def test_whole_numbers_without_a_unit_may_be_milliseconds(tmp_path: Path) -> None:
    """0, 50, 100, ...: s is written, and the doubt beside it."""
    _, text = drafted(tmp_path, table("t,u,y", [1000.0 * TIME, COMMAND, RESPONSE]))
    assert 'may well be "ms"' in text


def test_a_log_without_a_time_gets_a_sample_rate_to_fill_in(tmp_path: Path) -> None:
    """Two columns."""
    rig, _ = drafted(tmp_path, table("u,y", [COMMAND, RESPONSE]))
    assert rig.signals["time"].sample_rate == 1000.0
    assert "signals.time" in rig.guessed


def test_an_hdf5_log_is_drafted_by_its_paths(tmp_path: Path) -> None:
    """Units from attributes, other lengths left out."""
    with h5py.File(tmp_path / "log.h5", "w") as log:
        for path, values, unit in (
            ("/daq/time", TIME, "s"), ("/daq/drive", COMMAND, "V"), ("/daq/position", RESPONSE, "mm"),
            ("/slow/time", np.arange(40.0), "s"), ("/slow/temperature", np.arange(40.0) % 7, "degC"),
        ):  # fmt: skip
            log[path] = values
            log[path].attrs["units"] = unit
    rig, _ = drafted(tmp_path, (tmp_path / "log.h5").read_bytes(), "log.h5")
    assert roles(rig) == ("/daq/time", "/daq/drive", "/daq/position")


def test_a_log_with_one_signal_is_refused(tmp_path: Path) -> None:
    """A command without a response is no log of a rig."""
    with pytest.raises(RecordError, match="doesn't hold a command and a response"):
        drafted(tmp_path, table("t,u", [TIME, COMMAND]))


def test_names_that_would_break_the_file_are_written_safely(tmp_path: Path) -> None:
    """Quotes and backslashes in a header."""
    rig, _ = drafted(tmp_path, table("t,the \\u drive,y", [TIME, COMMAND, RESPONSE]))
    assert rig.signals["command"].source == "the \\u drive"


def test_a_draft_never_overwrites(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """The second call ends with 2 and leaves the first file as it was."""
    log = tmp_path / "run_1.csv"
    log.write_text(NAMED, "utf-8")
    assert main(["draft", str(log)]) == 0
    first = (tmp_path / "rig.toml").read_bytes()
    assert "9 guesses" in capsys.readouterr().out
    assert main(["draft", str(log)]) == 2
    assert "never overwrites" in capsys.readouterr().err
    assert (tmp_path / "rig.toml").read_bytes() == first
    with pytest.raises(RequestError, match="can't be written"):
        write_draft("", tmp_path / "none" / "rig.toml")
