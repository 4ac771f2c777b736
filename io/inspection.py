"""What is in a log, and what is wrong with it: lines for people, and a value for programs."""

from dataclasses import asdict, dataclass, replace
from pathlib import Path
from typing import Any

from ..ident.errors import RequestError
from .channel_summary import ChannelSum, ChannelSummary, ClockSummary, summed
from .read_record import read_record
from .read_table import read_table
from .readers.parts import in_parts
from .readers.port import Hints
from .readers.registry import reader_of
from .readers.still_there import still_there
from .record import Finding, Record, TableRecord
from .rigfile.rig import Rig, RunSpec
from .rigfile.table_runs import KIND

Row = tuple[str, str, str, str, str, str]
HEAD: Row = ("channel", "unit", "samples", "lost", "lowest", "highest")
NO_CLOCK = "no channel runs like a time: a rig file can state a sample_rate"


@dataclass(frozen=True)
class Inspection:
    """One log as found.

    Attributes
    ----------
    title : str
    channels : tuple of ChannelSummary
    clocks : tuple of ClockSummary
        Of the channels that run like a time.
    findings : tuple of Finding
    """

    title: str
    channels: tuple[ChannelSummary, ...]
    clocks: tuple[ClockSummary, ...]
    findings: tuple[Finding, ...]

    @property
    def rows(self) -> tuple[Row, ...]:
        """One a channel: name, unit, samples, lost samples, lowest and highest value."""
        return tuple(_row(channel) for channel in self.channels)

    @property
    def text(self) -> str:
        """All of it, aligned."""
        widths = [max(len(row[column]) for row in (HEAD, *self.rows)) for column in range(len(HEAD))]
        padded = [[cell.ljust(width) for cell, width in zip(row, widths, strict=True)] for row in (HEAD, *self.rows)]
        table = ["  ".join(cells) for cells in padded]
        notes = [_note(clock) for clock in self.clocks] or [NO_CLOCK]
        said = [f"! {finding.text}" for finding in self.findings] or ["nothing wrong was found"]
        return "\n".join([self.title, *(f"  {line}".rstrip() for line in (*table, *notes, *said))])

    @property
    def usable(self) -> str:
        """The gravest of the findings: "yes", "holds" or "no"."""
        refuses = {finding.refuses for finding in self.findings}
        return "no" if "stops" in refuses else "holds" if "holds" in refuses else "yes"

    @property
    def value(self) -> dict[str, Any]:
        """The same for programs; times and extremes in the unit of their channel."""
        return {
            "title": self.title,
            "usable": self.usable,
            "channels": [asdict(channel) for channel in self.channels],
            "clocks": [asdict(clock) for clock in self.clocks],
            "findings": [asdict(finding) for finding in self.findings],
        }


def inspect_log(file: Path) -> Inspection:
    """Every channel of a log as its reader finds it, without a rig file; a large log part by part.

    Parameters
    ----------
    file : Path

    Raises
    ------
    RecordError
        When the file can't be read.
    """
    with still_there(file):
        return _inspected(file)


def _inspected(file: Path) -> Inspection:
    reader, hints = reader_of(file), Hints()
    infos = reader.channels(file, hints)
    together: dict[int | None, list[str]] = {}  # channels of one log may differ in length: those are read apart
    for info in infos:
        together.setdefault(info.samples, []).append(info.name)
    sums: dict[str, ChannelSum] = {}
    clocks: dict[str, ChannelSum] = {}
    findings: dict[Finding, None] = {}
    for names in together.values():
        for log in in_parts(reader, file, names, hints):
            findings.update(dict.fromkeys(log.findings))
            for name in names:
                channel = log.channels[name]
                sums.setdefault(name, ChannelSum(name, channel.unit)).add(channel.values)
                if channel.clock is not None:
                    clocks.setdefault(name, ChannelSum(f"time of {name}", "s")).add(channel.clock)
    channels = tuple(sums[info.name].channel for info in infos)
    rising = tuple(clock for info in infos if (clock := clocks.get(info.name, sums[info.name]).clock) is not None)
    return Inspection(f"{file} ({reader.name})", channels, rising, tuple(findings))


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
    return tuple(
        _of_table(read_table(spec, rig), rig) if spec.excitation == KIND else _of_record(read_record(spec, rig), rig)
        for spec in specs
    )


def _fresh(file: Path, rig: Rig) -> RunSpec:
    if not rig.runs:
        raise RequestError(
            "the rig file names no run to read this log like",
            where=str(rig.file),
            found="no [[runs]]",
            expected="at least one run",
        )
    like = next((run for run in rig.runs if run.excitation != KIND), rig.runs[0])
    plain = replace(like, from_s=None, to_s=None, command_before=None, taken=None)
    signals = like.signals if like.excitation == KIND else rig.signals
    return replace(plain, file=file.resolve(), shown=str(file), signals=signals)


def _of_table(record: TableRecord, rig: Rig) -> Inspection:
    table, gain = record.table, f"({rig.response_unit})/({rig.command_unit})"
    columns = (
        ("frequency", "rad/s", table.frequency),
        ("magnitude", gain, table.magnitude),
        ("phase", "rad", table.phase),
        ("magnitude error", gain, table.magnitude_error),
        ("phase error", "rad", table.phase_error),
        ("coherence", "1", table.coherence),
    )
    channels = tuple(summed(name, unit, values).channel for name, unit, values in columns if values is not None)
    return Inspection(f"{record.spec.shown} ({record.spec.use}, frequency table)", channels, (), record.findings)


def _of_record(record: Record, rig: Rig) -> Inspection:
    run = record.run
    sums = [
        summed("time", "s", run.time),
        summed("command", rig.command_unit, run.command),
        summed("response", rig.response_unit, run.response),
    ]
    sums += [summed("setpoint", rig.response_unit, run.setpoint)] if run.setpoint is not None else []
    title = f"{record.spec.shown} ({record.spec.use}, {record.spec.loop} loop)"
    clock = sums[0].clock
    channels = tuple(each.channel for each in sums)
    return Inspection(title, channels, () if clock is None else (clock,), record.findings)


def _row(channel: ChannelSummary) -> Row:
    ends = ["-" if end is None else f"{end:.6g}" for end in (channel.lowest, channel.highest)]
    return (channel.name, channel.unit or "not stated", str(channel.samples), str(channel.lost), ends[0], ends[1])


def _note(clock: ClockSummary) -> str:
    """A line about a channel that only ever rises, as a time does."""
    span = f"{clock.shortest:.6g} to {clock.longest:.6g}"
    return f"{clock.name}: rises by {clock.step:.6g} a sample ({span}), {clock.whole:.6g} in all"
