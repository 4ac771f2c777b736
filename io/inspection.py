"""What is in a log, and what is wrong with it, in lines for people."""

from collections.abc import Iterator
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from ..ident.errors import RequestError
from ..ident.run import FloatArray
from .read_record import read_record
from .readers.port import Channel, Hints
from .readers.registry import reader_of
from .record import Finding, Record
from .rigfile.rig import Rig, RunSpec

Row = tuple[str, str, str, str, str, str]
HEAD: Row = ("channel", "unit", "samples", "lost", "lowest", "highest")


@dataclass(frozen=True)
class Inspection:
    """One log as found.

    Attributes
    ----------
    title : str
    rows : tuple of Row
        One a channel: name, unit, samples, lost samples, lowest and highest value.
    notes : tuple of str
        Duration and sampling, where a time is known.
    findings : tuple of Finding
    """

    title: str
    rows: tuple[Row, ...]
    notes: tuple[str, ...]
    findings: tuple[Finding, ...]

    @property
    def text(self) -> str:
        """All of it, aligned."""
        widths = [max(len(row[column]) for row in (HEAD, *self.rows)) for column in range(len(HEAD))]
        padded = [[cell.ljust(width) for cell, width in zip(row, widths, strict=True)] for row in (HEAD, *self.rows)]
        table = ["  ".join(cells) for cells in padded]
        said = [f"! {finding.text}" for finding in self.findings] or ["nothing wrong was found"]
        return "\n".join([self.title, *(f"  {line}".rstrip() for line in (*table, *self.notes, *said))])


def inspect_log(file: Path) -> Inspection:
    """Every channel of a log as its reader finds it, without a rig file.

    Parameters
    ----------
    file : Path

    Raises
    ------
    RecordError
        When the file can't be read.
    """
    reader, hints = reader_of(file), Hints()
    infos = reader.channels(file, hints)
    together: dict[int | None, list[str]] = {}  # channels of one log may differ in length: those are read apart
    for info in infos:
        together.setdefault(info.samples, []).append(info.name)
    read: dict[str, Channel] = {}
    findings: dict[Finding, None] = {}
    for names in together.values():
        log = reader.read(file, names, hints)
        read.update(log.channels)
        findings.update(dict.fromkeys(log.findings))
    channels = {info.name: read[info.name] for info in infos}
    rows = tuple(_row(name, channel.unit or "not stated", channel.values) for name, channel in channels.items())
    notes = tuple(_clocks(channels)) or ("no channel runs like a time: a rig file can state a sample_rate",)
    return Inspection(f"{file} ({reader.name})", rows, notes, tuple(findings))


def inspect_run(file: Path, rig: Rig) -> tuple[Inspection, ...]:
    """A log read as the rig file says; once for each window that the rig file takes from it.

    Parameters
    ----------
    file : Path
        A run of the rig file, or a fresh log with the same signals.
    rig : Rig

    Raises
    ------
    RecordError, RequestError
        As when the run is read in a job.
    """
    specs = [spec for spec in rig.runs if spec.file == file.resolve()] or [_fresh(file, rig)]
    return tuple(_of_record(read_record(spec, rig), rig) for spec in specs)


def _fresh(file: Path, rig: Rig) -> RunSpec:
    if not rig.runs:
        raise RequestError(
            "the rig file names no run to read this log like",
            where=str(rig.file),
            found="no [[runs]]",
            expected="at least one run",
        )
    plain = replace(rig.runs[0], from_s=None, to_s=None, command_before=None, taken=None)
    return replace(plain, file=file.resolve(), shown=str(file), signals=rig.signals)


def _of_record(record: Record, rig: Rig) -> Inspection:
    run = record.run
    rows = [
        _row("time", "s", run.time),
        _row("command", rig.command_unit, run.command),
        _row("response", rig.response_unit, run.response),
    ]
    rows += [_row("setpoint", rig.response_unit, run.setpoint)] if run.setpoint is not None else []
    title = f"{record.spec.shown} ({record.spec.use}, {record.spec.loop} loop)"
    return Inspection(title, tuple(rows), tuple(_clock("time", run.time)), record.findings)


def _row(name: str, unit: str, values: FloatArray) -> Row:
    finite = values[np.isfinite(values)]
    ends = (f"{finite.min():.6g}", f"{finite.max():.6g}") if finite.size else ("-", "-")
    return (name, unit, str(values.size), str(values.size - finite.size), *ends)


def _clocks(channels: dict[str, Channel]) -> Iterator[str]:
    for name, channel in channels.items():
        if channel.clock is not None:
            yield from _clock(f"time of {name}", channel.clock)
        else:
            yield from _clock(name, channel.values)


def _clock(name: str, time: FloatArray) -> Iterator[str]:
    """A line about a channel that only ever rises, as a time does."""
    steps = np.diff(time)
    if steps.size < 2 or not np.all(steps > 0):
        return
    middle = float(np.median(steps))
    span = f"{steps.min():.6g} to {steps.max():.6g}"
    yield f"{name}: rises by {middle:.6g} a sample ({span}), {time[-1] - time[0]:.6g} in all"
