"""The kinds of input: how one is made and spoilt, and the commands that it goes through."""

import random
import zlib
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path

import hdf5_inputs
import rig_inputs
import table_inputs
import text_inputs
from forked import ask_forked
from gainwright.io.readers import through_child
from judged import GOOD, Fault, Verdict, judge

READ_AS = """
[rig]
name = "invented"
[signals]
time = {{ source = "{0}", unit = "s" }}
command = {{ source = "{1}", unit = "V" }}
response = {{ source = "{2}", unit = "mm" }}
[[runs]]
file = "{3}"
use = "fit"
[controller]
update_interval = "10 ms"
"""
Run = Callable[[Path, bytes], Iterator[Verdict]]


@dataclass(frozen=True)
class Kind:
    """One kind of input.

    Attributes
    ----------
    sound, rare : callable
        Make an input; a rare one is small to write and perhaps dear to read.
    spoil : callable
        Changes the bytes of one.
    run : callable
        Puts one into a folder and through the commands.
    guided : bool
        The code that reads it runs in this process, so that its coverage can lead the fuzzer.
    """

    sound: Callable[[random.Random], bytes]
    spoil: Callable[[bytes, random.Random], bytes]
    rare: Callable[[random.Random], bytes]
    run: Run
    guided: bool = True

    def fresh(self, dice: random.Random) -> bytes:
        """An input out of nothing."""
        chance = dice.random()
        if chance < 0.02:
            return self.rare(dice)
        made = self.sound(dice)
        return made if chance < 0.1 else self.spoil(made, dice)


def _inspected(log: Path, content: bytes, rig: Path) -> Iterator[Verdict]:
    """As it is; then, when it can be read, as a rig file says; and drafted now and then."""
    log.write_bytes(content)
    first = judge(["inspect", str(log)], log.name)
    yield first
    turn = zlib.crc32(content) % 24
    if first.code in GOOD and turn % 4 == 0:
        yield judge(["inspect", str(log), "--rig", str(rig)], log.name)
    if turn == 0:
        drafted = log.parent / "drafted.toml"
        drafted.unlink(missing_ok=True)
        verdict = judge(["draft", str(log), "--out", str(drafted)], log.name)
        yield verdict
        if verdict.code in GOOD:
            yield _loads(drafted, log)
    yield from _unchanged(log, content)


def _loads(drafted: Path, log: Path) -> Verdict:
    """What we drafted ourselves is never refused as no rig file, whatever the log is called and holds."""
    return judge(["inspect", str(log), "--rig", str(drafted)], log.parent.name)


def _unchanged(log: Path, content: bytes) -> Iterator[Verdict]:
    if log.read_bytes() != content:
        yield Verdict(1, Fault("the log was changed", log.name))


def _rig_beside(folder: Path, log: str, *sources: str) -> Path:
    rig = folder / "as.toml"
    if not rig.exists():
        rig.write_text(READ_AS.format(*sources, log))
    return rig


def _run_text(folder: Path, content: bytes) -> Iterator[Verdict]:
    yield from _inspected(folder / "log.csv", content, _rig_beside(folder, "log.csv", "1", "2", "3"))


def _run_hdf5(folder: Path, content: bytes) -> Iterator[Verdict]:
    before = through_child.ask_child
    through_child.ask_child = ask_forked
    try:
        yield from _inspected(folder / "log.h5", content, _rig_beside(folder, "log.h5", "t", "u", "y"))
    finally:
        through_child.ask_child = before


def _run_rig(folder: Path, content: bytes) -> Iterator[Verdict]:
    log, rig = folder / "log.csv", folder / "rig.toml"
    if not log.exists():
        rows = (f"{0.01 * k:.2f},{float(k // 50 % 2)},{(k * k) % 17 * 0.1:.2f}" for k in range(200))
        log.write_text("t,u,y\n" + "\n".join(rows) + "\n")
    rig.write_bytes(content)
    yield judge(["inspect", str(log), "--rig", str(rig)], folder.name)


def _run_table(folder: Path, content: bytes) -> Iterator[Verdict]:
    log, turn = folder / "table.csv", zlib.crc32(content)
    log.write_bytes(content)
    rig = folder / f"as_table_{turn % len(table_inputs.RIGS)}.toml"
    if not rig.exists():
        rig.write_text(table_inputs.RIGS[turn % len(table_inputs.RIGS)])
    yield judge(["inspect", str(log), "--rig", str(rig)], log.name)
    yield from _unchanged(log, content)


KINDS = {
    "csv": Kind(text_inputs.sound, text_inputs.spoil, text_inputs.wide_or_long, _run_text),
    "rigfile": Kind(rig_inputs.sound, rig_inputs.spoil, rig_inputs.deep_or_long, _run_rig),
    "table": Kind(table_inputs.sound, table_inputs.spoil, text_inputs.wide_or_long, _run_table),
    "hdf5": Kind(hdf5_inputs.sound, hdf5_inputs.spoil, hdf5_inputs.sound, _run_hdf5, guided=False),
}
