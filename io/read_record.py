"""One run from its file to a record: channels, units, clock, window, health, and the trail back to the bytes."""

import hashlib
from dataclasses import replace

import numpy as np

from ..ident.errors import RecordError, RequestError
from ..ident.health.copied import share_stretch
from ..ident.health.fingerprint import Marks, fingerprint, same_origin
from ..ident.run import Between, Run
from .command_worked_out import law_in_force, work_out_command
from .in_order import finding_of, in_order, raise_stops
from .look_at_record import looked_at
from .readers.parts import large
from .readers.port import Hints, Reader
from .readers.registry import reader_of
from .readers.still_there import still_there
from .record import Record, sha256_of
from .rigfile.rig import Rig, RunSpec
from .rigfile.table_runs import KIND
from .samples import Samples, samples_of
from .thinning import Taken, thinned
from .unit_slips import unit_slips


def read_record(spec: RunSpec, rig: Rig) -> Record:
    """Read one run of a rig file.

    Parameters
    ----------
    spec : RunSpec
    rig : Rig
        For the units of the signals and the dialect of the logs.

    Returns
    -------
    Record
        Its run's time begins at zero with the first sample of the window.

    Raises
    ------
    RecordError
        When the log can't be read or used.
    RequestError
        When a source isn't in the log, or a unit doesn't fit.
    """
    with still_there(spec.file):
        return _read(spec, rig)


def _read(spec: RunSpec, rig: Rig) -> Record:
    if spec.excitation == KIND:
        raise RequestError(
            "a frequency table is no log in time",
            where=str(spec.file),
            found=f'excitation = "{KIND}"',
            expected="a log of command and response over time",
            advice="hold a fresh log against the sheet, or process the table",
        )
    roles = {role: signal for role, signal in spec.signals.items() if signal.source is not None}
    hints = Hints(rig.dialect, spec.group)
    reader, sources = reader_of(spec.file), [str(signal.source) for signal in roles.values()]
    asked = large(reader, spec.file, sources, hints)
    if asked is None:
        taken = _whole(spec, rig, reader, sources, hints)
    else:
        taken = thinned(spec, rig, reader, sources, hints, asked)
    windowed, before, findings = taken.samples, taken.before, list(taken.findings)
    looked = looked_at(
        spec, rig, windowed.time, windowed.command, windowed.response, setpoint=windowed.setpoint, before=before
    )
    findings += [finding_of(seen) for seen in looked.seen if seen.kind not in taken.seen_already]
    findings += unit_slips(spec, rig, windowed.time, windowed.response)
    raise_stops(spec, findings)
    run = Run(
        label=spec.shown,
        time=windowed.time - windowed.time[0],
        command=windowed.command,
        response=looked.response,
        setpoint=windowed.setpoint,
        between=taken.between or _between(spec),
        command_before=before,
        at_rest=before is not None and before == spec.command_before,
        excitation=spec.excitation,
        closed_loop=spec.loop == "closed",
        command_late=taken.late,
        law=law_in_force(spec.in_force) if spec.in_force and spec.loop == "closed" else None,
    )
    return Record(spec, run, sha256_of(spec.file), _samples_sha256(windowed), tuple(findings), taken.marks)


def _whole(spec: RunSpec, rig: Rig, reader: Reader, sources: list[str], hints: Hints) -> Taken:
    """Every sample of the window."""
    log = reader.read(spec.file, sources, hints)
    findings = list(log.findings)
    samples = in_order(spec, samples_of(spec, rig, log), findings)
    late = 0.0
    if "command" not in spec.signals:
        worked_out = work_out_command(spec, rig, samples.time, samples.setpoint, samples.response)
        samples, late = replace(samples, command=worked_out.command), worked_out.late
        findings += worked_out.findings
        spec = replace(spec, command_before=worked_out.before)
    windowed, before = _windowed(spec, samples)
    _require_samples(spec, windowed, samples)
    return Taken(windowed, before, tuple(findings), late=late)


def shares_samples(a: Record, b: Record) -> bool:
    """Whether two records share a stretch of samples, under whatever names, formats, windows and clocks.

    Copies are found by their noise: at least 30 samples in a row. Constant stretches and coarse readings that agree by
    chance don't count.
    """
    if a.samples_sha256 == b.samples_sha256:
        return True
    if (a.marks is not None or b.marks is not None) and same_origin(_marks(a), _marks(b)):
        return True
    return share_stretch(a.run.command, a.run.response, b.run.command, b.run.response)


def _marks(record: Record) -> Marks:
    """Of a record that was read by blocks those of all its samples."""
    return fingerprint(record.run.command, record.run.response) if record.marks is None else record.marks


def _windowed(spec: RunSpec, samples: Samples) -> tuple[Samples, float | None]:
    """The samples of the half-open window, and the steady command before them where it is known."""
    start = -np.inf if spec.from_s is None else spec.from_s
    end = np.inf if spec.to_s is None else spec.to_s
    slack = 1e-9 * max(1.0, float(samples.time[-1])) if len(samples.time) else 0.0
    inside = (samples.time >= start - slack) & (samples.time < end - slack)
    first = np.flatnonzero(inside)
    if len(first) and first[0] > 0:
        return samples.take(inside), float(samples.command[first[0] - 1])
    return samples.take(inside), spec.command_before


def _require_samples(spec: RunSpec, windowed: Samples, whole: Samples) -> None:
    if len(windowed.time) >= 2:
        return
    if len(whole.time) < 2:
        raise RecordError(
            "this log has too few samples",
            where=str(spec.file),
            found=f"{len(whole.time)} samples",
            expected="a log of the rig while its command moves",
        )
    raise RequestError(
        "the window holds no samples",
        where=str(spec.file),
        found=f"from {spec.from_s} s to {spec.to_s} s",
        expected=f"a part of 0 s to {whole.time[-1]:.6g} s",
    )


def _between(spec: RunSpec) -> Between:
    """A sampled controller holds its command: a log taken in closed loop need not be asked."""
    return "held" if spec.loop == "closed" and spec.between_samples == "auto" else spec.between_samples


def _samples_sha256(samples: Samples) -> str:
    """Of the used samples as logged; time in s from the first of them, to 1 ns, so that its unit doesn't matter."""
    time = np.round(samples.time - samples.time[0], 9) + 0.0
    digest = hashlib.sha256()
    for values in (time, samples.logged_command, samples.logged_response):
        digest.update(np.ascontiguousarray(values + 0.0, dtype="<f8").tobytes())
    return digest.hexdigest()
