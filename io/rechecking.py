"""An earlier sheet held against fresh measurements: still valid, drifting, or no longer valid; or one of its rungs."""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from datetime import UTC, date, datetime
from pathlib import Path
from typing import Any, Literal

import numpy as np
from threadpoolctl import threadpool_limits

from ..design.closing.compared import Compared
from ..design.closing.first_move import OpeningAsked, judge_opening
from ..design.closing.given import compare_given
from ..design.closing.rung import RungAsked, RungRun, judge_rung
from ..design.closing.table import compare_table
from ..design.closing.verdict import compare
from ..design.closing.words import Units
from ..design.discretise import law_from_gains
from ..ident.confront import confront
from ..ident.errors import RecordError, RequestError
from ..ident.fitted import Fit
from ..ident.identify import identify
from ..ident.trend import Trend, trends
from .again import Again, job_again
from .earlier import Earlier, gains_of_row, law_of_row, read_earlier
from .progress import Progress, silent
from .read_record import read_record
from .read_table import read_table
from .record import Record, Source, TableRecord
from .rigfile.load import load_rig
from .rigfile.rig import LogDialect, Rig, RunSpec, Signal
from .rigfile.table_runs import KIND

Verdict = Literal["valid", "drifting", "no longer valid", "not comparable"]


@dataclass(frozen=True, eq=False)
class Rechecked:
    """The answer for an earlier sheet.

    Attributes
    ----------
    earlier : Earlier
    compared : tuple of (date, Compared), by date
    trends : tuple of Trend
        Empty with fewer than three dates.
    verdict : {"valid", "drifting", "no longer valid", "not comparable"}
    notes : tuple of str
    """

    earlier: Earlier
    compared: tuple[tuple[date, Compared], ...]
    trends: tuple[Trend, ...]
    verdict: Verdict
    notes: tuple[str, ...]


def recheck_sheet(sheet: Path, runs: Sequence[Path], rig: Path | None = None, progress: Progress = silent) -> Rechecked:
    """Hold an earlier sheet's model and gains against fresh runs; of frequency tables those that the rig file lists.

    Raises
    ------
    RequestError, RecordError
    """
    earlier = read_earlier(sheet)
    with threadpool_limits(limits=1):
        again = job_again(earlier)
        reader, notes = _rig_of(earlier, again, rig)
        if not again.from_dossier:
            notes += ("no dossier of that job beside the sheet: plausible plants were drawn from its covariance",)
        records = [_read_any(path, reader, progress) for path in runs]
        dated = sorted(((_taken(record), record) for record in records), key=lambda pair: pair[0])
        notes += _date_notes(records)
        compared = tuple((day, _compare(record, earlier, again, progress)) for day, record in dated)
        moving = _trends([pair for pair, (_, each) in zip(dated, compared, strict=True) if _seen(each)], again)
    return Rechecked(earlier, compared, moving, _verdict(compared, moving), notes)


def recheck_rung(
    sheet: Path,
    number: int,
    runs: Sequence[Path],
    rig: Path | None = None,
    setpoint: str | None = None,
    progress: Progress = silent,
) -> tuple[RungRun, ...]:
    """Hold the logs of a ladder rung against what its loop should do.

    Raises
    ------
    RequestError
        There is no such rung, or the log's setpoint is not known.
    RecordError
    """
    earlier = read_earlier(sheet)
    rows = {row["rung"]: row for row in earlier.sheet["ladder"]}
    if number not in rows:
        raise RequestError(
            "there is no such rung on the sheet",
            where=str(sheet),
            found=f"--rung {number}",
            expected=f"one of {', '.join(str(each) for each in rows)}" if rows else "a sheet with a ladder",
        )
    with threadpool_limits(limits=1):
        again = job_again(earlier)
        reader, _ = _rig_of(earlier, again, rig)
        if number == 0:
            asked = _opening(rows[0]["expected"], rows[0]["abort"])
            return tuple(judge_opening(_read(path, reader, progress).run, asked) for path in runs)
        records = [_read(path, _with_setpoint(reader, setpoint), progress, rung=True) for path in runs]
        return tuple(_judge(record, rows[number], again, progress) for record in records)


def _opening(expected: dict[str, Any], abort: dict[str, Any]) -> OpeningAsked:
    band, start = expected["band_99_9"], expected["response_from"]["value"]
    return OpeningAsked(
        expected["command_to"]["value"] - expected["command_from"]["value"],
        expected["response_moves"]["predicted"],
        abort["moved_less_than"]["value"],
        expected["within"]["value"],
        np.array(band["time"]),
        np.array(band["low"]) - start,
        np.array(band["high"]) - start,
    )


def _judge(record: Record, row: dict[str, Any], again: Again, progress: Progress) -> RungRun:
    if record.run.setpoint is None:
        raise RequestError(
            "the log's setpoint is not known",
            where=record.spec.shown,
            found="no setpoint among the signals",
            expected="the setpoint as the controller had it",
            advice="name its column with --setpoint, or give a rig file with signals.setpoint by --rig",
        )
    progress(f"running the rung's loop under the setpoint of {record.spec.shown}")
    law = law_of_row(row["difference_equation"])
    if law is None:
        stand_in = again.design.law
        law = law_from_gains(gains_of_row(row), stand_in.update_interval, stand_in.clamp)
    fit, expected = again.fit, row["expected"]
    step = expected["setpoint_to"]["value"] - expected["setpoint_from"]["value"] if expected else None
    asked = RungAsked(
        law,
        step,
        expected["response_time"]["value"] if expected else None,
        expected["settling_time"]["predicted"] if expected else None,
    )
    return judge_rung(
        record.run,
        asked,
        fit.plant,
        fit.plausible,
        operating_command=fit.operating_command,
        operating_response=fit.operating_response,
        noise_std=fit.noise.std,
        limits=again.limits,
        setting=again.setting,
    )


def _compare(record: Source, earlier: Earlier, again: Again, progress: Progress) -> Compared:
    plant = earlier.sheet["plant"]
    if isinstance(record, TableRecord):
        return compare_table(
            record.table,
            again.fit,
            again.design,
            requirements=again.requirements,
            limits=again.limits,
            setting=again.setting,
        )
    if again.given:
        return compare_given(
            record.run,
            again.fit,
            _fitted_alone(record, again, progress),
            again.design,
            requirements=again.requirements,
            limits=again.limits,
            setting=again.setting,
        )
    return compare(
        record.run,
        again.fit,
        again.design,
        requirements=again.requirements,
        limits=again.limits,
        setting=again.setting,
        progress=progress,
        units=Units(plant["command_unit"], plant["response_unit"]),
    )


def _fitted_alone(record: Record, again: Again, progress: Progress) -> Fit | None:
    progress(f"fitting {record.spec.shown} by itself")
    try:
        return identify([record.run], operating_command=again.fit.operating_command, progress=progress)
    except RecordError:
        return None  # the comparison says so


def _seen(compared: Compared) -> bool:
    return compared.verdict != "not comparable"


def _trends(dated: Sequence[tuple[date, Source]], again: Again) -> tuple[Trend, ...]:
    """Of the fitted parameters over three dates or more; frequency tables and plants that were given have none."""
    runs = [(day, record.run) for day, record in dated if isinstance(record, Record)]
    days = [float(day.toordinal()) for day, _ in runs]
    if len(set(days)) < 3 or again.given:
        return ()
    return trends(days, [confront(run, again.fit).changes for _, run in runs])


def _verdict(compared: Sequence[tuple[date, Compared]], moving: Sequence[Trend]) -> Verdict:
    """The latest run that could be compared decides; a trend qualifies it."""
    told = [(day, each) for day, each in compared if _seen(each)]
    if not told:
        return "not comparable"
    last = max(day for day, _ in told)
    if any(each.verdict == "disagrees" for day, each in told if day == last):
        return "no longer valid"
    return "drifting" if any(trend.drifting for trend in moving) else "valid"


def _read_any(path: Path, rig: Rig, progress: Progress) -> Source:
    """A log, or a frequency table where the rig file lists the file as one."""
    listed = next((spec for spec in rig.runs if spec.file == path.resolve()), None)
    if listed is None or listed.excitation != KIND or not path.is_file():
        return _read(path, rig, progress)
    progress(f"reading {path}")
    return read_table(listed, rig)


def _read(path: Path, rig: Rig, progress: Progress, *, rung: bool = False) -> Record:
    progress(f"reading {path}")
    if not path.is_file():
        raise RequestError("there is no such log", where=str(path), found="nothing", expected="a log of a run")
    listed = next((spec for spec in rig.runs if spec.file == path.resolve()), None)
    plain = RunSpec(path.resolve(), str(path), "held-out", "open", "auto", "auto", rig.signals)
    if rung:
        held = "held" if listed is None else listed.between_samples
        plain = replace(listed or plain, loop="closed", signals=rig.signals, between_samples=held)
    record = read_record(plain if rung else listed or plain, rig)
    for finding in record.findings:
        if finding.refuses == "stops":
            raise RecordError(finding.kind, where=str(path), found=f"{finding.size}, {finding.where}")
    return record


def _with_setpoint(rig: Rig, source: str | None) -> Rig:
    if source is None:
        return rig
    return replace(rig, signals={**rig.signals, "setpoint": Signal(source, rig.response_unit)})


def _rig_of(earlier: Earlier, again: Again, given: Path | None) -> tuple[Rig, tuple[str, ...]]:
    """How the logs are to be read: as --rig says, as the sheet's own rig file says, or as the sheet itself says."""
    if given is not None:
        return load_rig(given), ()
    trail = earlier.sheet["provenance"]["rig_file"]
    try:
        rig = load_rig(Path(trail["file"]))
    except (RequestError, RecordError):
        return _from_sheet(earlier, again), ("the sheet's rig file is gone: logs are read as the sheet says",)
    if rig.sha256 != trail["sha256"]:
        return rig, ("the rig file has changed since the sheet was made; logs are read as it says now",)
    return rig, ()


def _from_sheet(earlier: Earlier, again: Again) -> Rig:
    part = earlier.sheet["rig"]
    signals = {role: Signal(each["source"], each["unit"]) for role, each in part["signals"].items()}
    if signals.get("time") is None or signals["time"].source is None:
        raise RequestError(
            "the sheet does not say how time is logged",
            where=str(earlier.file),
            found="no source of the time",
            expected="a rig file",
            advice="give one by --rig",
        )
    plant = earlier.sheet["plant"]
    return Rig(
        part["name"],
        earlier.file,
        earlier.sha256,
        plant["command_unit"],
        plant["response_unit"],
        signals,
        (),
        LogDialect(),
        again.setting,
        again.requirements,
        again.limits,
    )


def _taken(record: Source) -> date:
    """The date that the rig file states, else that of the file."""
    if record.spec.taken is not None:
        return date.fromisoformat(record.spec.taken[:10])
    return datetime.fromtimestamp(record.spec.file.stat().st_mtime, UTC).date()


def _date_notes(records: Sequence[Source]) -> tuple[str, ...]:
    undated = sum(record.spec.taken is None for record in records)
    if len(records) < 3 or not undated:
        return ()
    return (
        f"{undated} of {len(records)} runs have no `taken` in a rig file: dated by when their file was last changed",
    )
