"""At least sixty broken logs, each with the finding that it must give."""

import h5py
import numpy as np
from made import (
    COMMAND,
    COUNT,
    RESPONSE,
    TIME,
    Broken,
    answer,
    cut,
    hdf5,
    log,
    noise,
    raw,
    replaced,
    rows,
    spoiled,
    text,
)  # fmt: skip

INDEX = np.arange(COUNT)
LINES = rows(TIME, COMMAND, RESPONSE)
SINE = np.sin(2.0 * np.pi * TIME)
DEAF = np.where((TIME >= 4.0) & (TIME < 9.5), 1.0, COMMAND)  # what an actuator did that stayed at 1 V
FAST = np.select([INDEX < 100, INDEX < 400, INDEX < 800], [0.0, 1.0, -1.0], 0.5)
LATE = np.where(TIME < 11.9, COMMAND, 1.0)
MEMORY = h5py.VirtualSource("absent.h5", "y", shape=(COUNT,))


def jitter(size: float) -> np.ndarray:
    return TIME + np.random.default_rng(7).uniform(-size, size, COUNT)


def without(places: object) -> list[np.ndarray]:
    """Time, command and response with samples taken out."""
    keep = np.delete(INDEX, places)  # type: ignore[arg-type]
    return [TIME[keep], COMMAND[keep], RESPONSE[keep]]


def lost(*phases: int) -> np.ndarray:
    return np.where(np.isin(INDEX % 3, phases), np.nan, RESPONSE)


def tone(frequency: float, size: float = 0.2) -> np.ndarray:
    return RESPONSE + size * np.sin(2.0 * np.pi * frequency * TIME + 0.4)


def soft(file: h5py.File) -> None:
    file["y"] = h5py.SoftLink("/nowhere")


def outside(file: h5py.File) -> None:
    file["y"] = h5py.ExternalLink("/etc/absent.h5", "/y")


def virtual(file: h5py.File) -> None:
    layout = h5py.VirtualLayout(shape=(COUNT,), dtype="f8")
    layout[:] = MEMORY
    file.create_virtual_dataset("y", layout)


def words(file: h5py.File) -> None:
    file["y"] = ["one", "two"]


def loop(file: h5py.File) -> None:
    file["y"] = h5py.SoftLink("/y")


def swap_lines(first: int, second: int) -> list[str]:
    changed = LINES.copy()
    changed[first], changed[second] = changed[second], changed[first]
    return changed


def with_line(place: int, line: str) -> list[str]:
    return [*LINES[:place], line, *LINES[place:]]


MS = (('time = { source = "t", unit = "s" }', 'time = { source = "t_ms", unit = "s" }'),)
RAD = (('response = { source = "y", unit = "mm" }', 'response = { source = "y_deg", unit = "rad" }'),
       ('"-400 mm"', '"-400 rad"'), ('"400 mm"', '"400 rad"'),
       ('test_step = "2 mm"', 'test_step = "2 rad"'))  # fmt: skip
RANGE = (('source = "y", unit = "mm"', 'source = "y", unit = "mm", range = { lowest = "-8 mm", highest = "8 mm" }'),)
REACH = (('source = "u", unit = "V"', 'source = "u", unit = "V", range = { lowest = "-0.8 V", highest = "0.8 V" }'),)
TIGHT = (('"-400 mm"', '"100 mm"'), ('"400 mm"', '"102 mm"'))
QUICK = (('update_interval = "5 ms"', 'update_interval = "20 us"'),)

GALLERY: dict[str, Broken] = {
    # the clock
    "a gap while nothing moves": Broken(log(*without(slice(200, 250))), "gap", "no"),
    "a gap across a step": Broken(log(*without(slice(380, 430))), "gap", "holds"),
    "half of the record missing": Broken(log(*without(slice(420, 900))), "gap", "holds"),
    "jitter of the stamps": Broken(log(jitter(0.003)), "uneven sampling", "no"),
    "stamps rounded to 30 ms": Broken(log(np.floor(TIME / 0.03) * 0.03), "doubled stamps", "stops"),
    "stamps rounded to 1 ms at 3.2 ms": Broken(log(np.round(0.0032 * INDEX, 3)), "rounded stamps", "no"),
    "a clock that jumps back": Broken(log(np.where(INDEX > 600, TIME - 3.0, TIME)), "clock runs backwards", "stops"),
    "midnight": Broken(log(86395.0 + TIME - np.where(INDEX >= 500, 86400.0, 0.0)), "clock wraps", "no"),
    "a counter of ms that wraps": Broken(
        log(65.536 + TIME - 3.0 - np.where(INDEX >= 300, 65.536, 0.0)), "clock wraps", "no"),
    "the end of summer time": Broken(log(7000.0 + TIME - np.where(INDEX >= 500, 3600.0, 0.0)), "clock wraps", "no"),
    "two rows swapped": Broken(text(swap_lines(300, 301)), "samples out of order", "no"),
    "one row twice": Broken(text(with_line(300, LINES[300])), "doubled stamps", "no"),
    "a row without a time": Broken(log(spoiled(TIME, 300, np.nan)), "samples without a time", "no"),
    "a clock that stands still": Broken(log(np.full(COUNT, 5.0)), "clock|doubled stamps", "stops"),
    "stamps in ms called s by the rig file": Broken(
        text(rows(1000.0 * TIME, COMMAND, RESPONSE), "t_ms,u,y"), "unit slip", "holds", MS),
    "stamps far too large for seconds": Broken(log(1.7e12 + 1000.0 * TIME), "too large for their unit", "error"),
    "a record far slower than its controller": Broken(log(), "record slower than the controller", "no", QUICK),
    # samples that were lost or never taken
    "dropouts to zero": Broken(
        log(response=spoiled(80.0 + RESPONSE, slice(100, COUNT, 256), 0.0)), "dropouts", "no"),
    "spikes": Broken(log(response=spoiled(RESPONSE, [300, 303, 900], [20.0, -9.0, 40.0])), "spikes", "no"),
    "a few lost samples": Broken(log(response=spoiled(RESPONSE, [20, 21, 700], np.nan)), "lost samples", "no"),
    "a third lost": Broken(log(response=lost(0)), "lost samples", "holds"),
    "two thirds lost": Broken(log(response=lost(0, 1)), "lost samples", "stops"),
    "a lost command": Broken(log(command=spoiled(COMMAND, 50, np.nan)), "lost commands", "no"),
    "every third command lost": Broken(
        log(command=np.where(INDEX % 3 == 0, np.nan, COMMAND)), "command is lost in too many", "error"),
    "twelve samples": Broken(log(TIME[95:107], COMMAND[95:107], RESPONSE[95:107]), "too few samples", "stops"),
    "thirty samples": Broken(
        log(TIME[85:1185:36], COMMAND[85:1185:36], RESPONSE[85:1185:36]), "few samples", "no"),
    "one sample": Broken(text(LINES[:1]), "1 stamps", "stops"),
    "zeros after a crash": Broken(
        log(spoiled(5.0 + TIME, slice(1100, None), 0.0), spoiled(COMMAND, slice(1100, None), 0.0),
            spoiled(RESPONSE, slice(1100, None), 0.0)), "zeros at the end", "no"),
    # the sensor
    "a sensor that is not connected": Broken(log(response=np.full(COUNT, 3.2)), "dead response", "stops"),
    "noise for a response": Broken(log(response=noise(seed=4)), "dead response", "holds"),
    "frozen for a while": Broken(
        log(response=np.where((TIME > 5.0) & (TIME < 6.5), 2.5, RESPONSE)), "stuck response", "holds"),
    "frozen to the end": Broken(log(response=np.where(TIME > 4.2, RESPONSE[420], RESPONSE)), "stuck response", "holds"),
    "clipped at the top": Broken(log(response=np.minimum(RESPONSE, 8.0)), "clipping", "holds"),
    "clipped at the bottom": Broken(log(response=np.maximum(RESPONSE, -7.0)), "clipping", "holds"),
    "beyond the declared range": Broken(log(response=np.clip(RESPONSE, -8.0, 8.0)), "clipping", "holds", RANGE),
    "coarse readings": Broken(log(response=np.round(RESPONSE / 2.0) * 2.0), "coarse response", "no"),
    "a start that still moves": Broken(
        log(response=RESPONSE + np.where(TIME < 1.0, 4.0 * (1.0 - TIME), 0.0)), "unsettled start", "no"),
    "drift by a third of the answer": Broken(log(response=RESPONSE + 0.6 * TIME), "drift", "no"),
    "hum of 50 Hz": Broken(
        log(np.arange(COUNT) * 0.004, COMMAND,
            RESPONSE + 0.3 * np.sin(2.0 * np.pi * 49.95 * 0.004 * INDEX)), "mains tone", "no"),
    "hum of 60 Hz": Broken(
        log(np.arange(COUNT) * 0.004, COMMAND,
            RESPONSE + 0.3 * np.sin(2.0 * np.pi * 60.02 * 0.004 * INDEX)), "mains tone", "no"),
    "hum folded by slow sampling": Broken(
        log(np.arange(COUNT) * 0.0133, COMMAND,
            RESPONSE + 0.3 * np.sin(2.0 * np.pi * 50.0 * 0.0133 * INDEX)), "aliased mains tone", "no"),
    "vibration": Broken(log(response=tone(31.7)), "steady tone", "no"),
    # the actuator and the test
    "a command that never moves": Broken(
        log(command=np.full(COUNT, 2.0), response=20.0 + noise()), "idle command", "stops"),
    "a command beyond what the actuator can": Broken(log(), "command out of range", "holds", REACH),
    "an actuator that stopped following": Broken(
        log(response=answer(np.where(TIME < 7.0, COMMAND, -1.0)) + noise()), "actuator did not follow", "holds"),
    "a move that was missed": Broken(log(response=answer(DEAF) + noise()), "actuator did not follow", "holds"),
    "command and response swapped": Broken(log(command=RESPONSE, response=COMMAND + noise(0.002)),
                                           "command and response swapped", "holds"),
    "a command drowned in noise": Broken(
        log(response=0.0015 * answer(COMMAND) + noise(0.05)), "weak excitation", "no"),
    "a step at the very end": Broken(
        log(command=LATE, response=answer(LATE) + noise()),
        "early end", "no"),
    "sampled too slowly for its rig": Broken(
        log(command=FAST, response=answer(FAST, lag=0.002, delay=0) + noise()), "slow sampling", "no"),
    # units
    "degrees called radians by the rig file": Broken(text(LINES, "t,u,y_deg"), "unit slip", "holds", RAD),
    "a response far outside of its limits": Broken(log(), "unit slip", "holds", TIGHT),
    "another unit in the log than in the rig file": Broken(
        text(LINES, "t,u,y [cm]"), "state different units", "error"),
    # the text of the log
    "a cell that is no number": Broken(text(with_line(300, "3.0,abc,1.0")), "abc", "error"),
    "a row with a field too many": Broken(text(with_line(300, "3.0,1.0,1.0,9.0")), "another number of fields", "error"),
    "a row with a field too few": Broken(text(with_line(300, "3.0,1.0")), "another number of fields", "error"),
    "a last row that is cut": Broken(text([*LINES, "12.0,0"], end=""), "partial last line", "no"),
    "an empty file": Broken(raw(b""), "empty", "error"),
    "a header and nothing below": Broken(text([]), "no rows of numbers", "error"),
    "prose": Broken(raw(b"The rig was down today.\nNothing was logged.\n"), "no rows of numbers", "error"),
    "zero bytes after a crash": Broken(raw(("t,u,y\n" + "\n".join(LINES) + "\n").encode() + b"\x00" * 512),
                                       "zero bytes", "no"),
    "a remark under the samples": Broken(text([*LINES, "end of test, all well"]), "text under the samples", "no"),
    "the wrong column named": Broken(text(LINES, "t,u,z"), "not in the log", "error"),
    "two columns of one name": Broken(text([f"{line},1" for line in LINES], "t,u,y,y"), "same name", "error"),
    "dates in place of the response": Broken(
        text([f"{t:.2f},{u},12:00:{t:05.2f}" for t, u in zip(TIME, COMMAND, strict=True)]), "clock times", "error"),
    "a picture": Broken(raw(b"\x89PNG\r\n\x1a\n" + bytes(range(256)) * 8, "log.png"), "no reader knows", "error"),
    # HDF5
    "HDF5 cut in the middle": Broken(cut(hdf5(), 0.5), "can't be opened", "error"),
    "HDF5 of which only the signature is left": Broken(cut(hdf5(), 0.0005), "can't be opened", "error"),
    "a dangling link": Broken(hdf5(replaced(soft)), "links to something that is not in it", "error"),
    "a link to another file": Broken(hdf5(replaced(outside)), "links to another file", "error"),
    "a virtual dataset without its source": Broken(hdf5(replaced(virtual)), "put together from other files", "error"),
    "a link to itself": Broken(hdf5(replaced(loop)), "round in circles", "error"),
    "words for a response": Broken(hdf5(replaced(words)), "not a clock time", "error"),
    "channels of unequal length": Broken(hdf5(y=RESPONSE[:1190]), "channels of unequal length", "no"),
    "an empty channel": Broken(hdf5(y=RESPONSE[:0]), "empty", "error"),
}  # fmt: skip
