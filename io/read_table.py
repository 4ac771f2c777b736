"""One frequency table from its file to a value: columns, units, order, and what is wrong with it."""

import hashlib
from dataclasses import replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from ..ident.errors import RecordError, RequestError
from ..ident.run import FloatArray
from ..ident.tables import Table, usable_points
from . import units
from .readers.port import Channel, Hints
from .readers.registry import reader_of
from .readers.still_there import still_there
from .record import Finding, TableRecord, sha256_of
from .rigfile.rig import Rig, RunSpec, Signal
from .rigfile.table_runs import KIND, TABLE_ROLES
from .samples import LARGEST

_FEWEST = 6
# A point less sure than this (relative, a standard error) is no small error in every direction any more.
_UNSURE = 0.3
# Below this coherence the same holds for any usual number of averages (common practice, no source).
_INCOHERENT = 0.3
_NEPER = np.log(10.0) / 20.0  # a dB as a relative change


def read_table(spec: RunSpec, rig: Rig) -> TableRecord:
    """Read one frequency table of a rig file.

    Parameters
    ----------
    spec : RunSpec
        With the columns among its signals.
    rig : Rig

    Raises
    ------
    RecordError
        The table can't be read or used.
    RequestError
        A column isn't there, or its unit doesn't fit.
    """
    with still_there(spec.file), np.errstate(over="ignore", invalid="ignore"):  # what overflows is refused
        return _read(spec, rig)


def _read(spec: RunSpec, rig: Rig) -> TableRecord:
    hints = Hints(rig.dialect, spec.group)
    log = reader_of(spec.file).read(spec.file, [str(signal.source) for signal in spec.signals.values()], hints)
    raw = {role: _column(spec, role, log.channels[str(signal.source)]) for role, signal in spec.signals.items()}
    findings = list(log.findings)
    whole = np.all([np.isfinite(column) for column in raw.values()], axis=0)
    findings += _left_out("lost points", "a column has no number there", int(np.count_nonzero(~whole)), len(whole))
    order = np.argsort(raw["frequency"][whole], kind="stable")
    columns = {role: column[whole][order] for role, column in raw.items()}
    table = _table(spec, rig, columns, {role: log.channels[str(s.source)] for role, s in spec.signals.items()})
    sure = usable_points(table, _UNSURE)
    if table.coherence is not None:
        sure &= table.coherence >= _INCOHERENT
    findings += _left_out("unsure points", "hardly more than noise", int(np.count_nonzero(~sure)), len(sure))
    table = _taken(table, sure)
    findings += _seen(spec, rig, table)
    return TableRecord(spec, table, sha256_of(spec.file), _columns_sha256(columns), tuple(findings))


def _column(spec: RunSpec, role: str, channel: Channel) -> FloatArray:
    signal = spec.signals[role]
    if channel.stamps:
        raise RequestError(
            f"the {role}'s source holds dates or clock times",
            where=str(spec.file),
            found=f'"{signal.source}"',
            expected="a column of numbers",
        )
    lost = np.isin(channel.values, signal.lost_as) if signal.lost_as else np.zeros(len(channel.values), dtype=bool)
    return np.asarray(signal.scale * np.where(lost, np.nan, channel.values) + signal.offset)


def _table(spec: RunSpec, rig: Rig, columns: dict[str, FloatArray], channels: dict[str, Channel]) -> Table:
    """The columns in rad/s, response unit per command unit, and rad."""
    unit = {role: _unit(spec, role, signal, channels[role]) for role, signal in spec.signals.items()}
    gain = f"({rig.response_unit})/({rig.command_unit})"
    frequency = columns["frequency"] * _to_rad_per_s(spec, unit["frequency"])
    if unit["magnitude"] == "dB":
        magnitude = 10.0 ** (columns["magnitude"] / 20.0)
    else:
        magnitude = columns["magnitude"] * _factor(spec, "magnitude", unit["magnitude"], gain)
    _require(spec, "frequency", frequency, (frequency > 0.0) & (frequency < LARGEST), "above zero")
    _require(spec, "magnitude", magnitude, (magnitude > 0.0) & (magnitude < LARGEST), "above zero, or in dB")
    phase, of_phase = (
        columns[role] * _factor(spec, role, unit[role], "rad") if role in columns else None
        for role in ("phase", "phase_error")
    )
    of_magnitude = None
    if "magnitude_error" in columns:
        of_magnitude = columns["magnitude_error"] * _error_factor(spec, unit["magnitude_error"], gain, magnitude)
        _require(spec, "magnitude_error", of_magnitude, of_magnitude > 0.0, "above zero: a standard error")
    if of_phase is not None:
        _require(spec, "phase_error", of_phase, of_phase > 0.0, "above zero: a standard error")
    coherence = columns.get("coherence")
    if coherence is not None:
        coherence = coherence * (0.01 if unit["coherence"] == "%" else 1.0)
        _require(spec, "coherence", coherence, (coherence >= 0.0) & (coherence <= 1.0), "from 0 to 1")
    return Table(spec.shown, frequency, magnitude, phase, of_magnitude, of_phase, coherence)


def _unit(spec: RunSpec, role: str, signal: Signal, channel: Channel) -> str:
    stated = signal.unit or channel.unit or ("1" if role == "coherence" else None)
    if stated is None:
        usual = {"frequency": '"Hz" or "rad/s"', "phase": '"deg" or "rad"', "phase_error": '"deg" or "rad"'}
        raise RequestError(
            f"neither the rig file nor this table states the unit of the {role}",
            where=str(spec.file),
            found=f'source "{signal.source}"',
            expected=usual.get(role, 'such as "mm/V", or "dB"'),
        )
    return stated


def _to_rad_per_s(spec: RunSpec, unit: str) -> float:
    units.require_known(unit)
    if units.same_kind(unit, "rad/s"):
        return units.difference_factor(unit, "rad/s")
    if units.same_kind(unit, "Hz") and "Hz" in unit:
        return 2 * np.pi * units.difference_factor(unit, "Hz")
    raise RequestError(
        "not a unit of frequency", where=str(spec.file), found=f'"{unit}"', expected='"Hz", "rad/s" or "rpm"'
    )


def _factor(spec: RunSpec, role: str, unit: str, wanted: str) -> float:
    try:
        return units.difference_factor(unit, wanted)
    except RequestError as problem:
        also = ', or "dB"' if role.startswith("magnitude") else ""
        raise RequestError(
            f"wrong kind of unit for the {role}",
            where=str(spec.file),
            found=f'"{unit}"',
            expected=f'a unit such as "{wanted}"{also}',
        ) from problem


def _error_factor(spec: RunSpec, unit: str, gain: str, magnitude: FloatArray) -> FloatArray | float:
    """From the error column to response unit per command unit."""
    if unit == "dB":
        return np.asarray(_NEPER * magnitude)
    return np.asarray(0.01 * magnitude) if unit == "%" else _factor(spec, "magnitude_error", unit, gain)


def _require(spec: RunSpec, role: str, values: FloatArray, good: NDArray[np.bool_], expected: str) -> None:
    if good.all():
        return
    first = int(np.flatnonzero(~good)[0])
    raise RecordError(
        f"a {role.replace('_', ' ')} of the table can't be",
        where=f'{spec.file}, source "{spec.signals[role].source}"',
        found=f"{values[first]:.6g} at point {first + 1} by frequency, {int(np.count_nonzero(~good))} such points",
        expected=expected,
        advice="check the column and its unit",
    )


def _taken(table: Table, sure: NDArray[np.bool_]) -> Table:
    columns = ("frequency", "magnitude", "phase", "magnitude_error", "phase_error", "coherence")
    kept: dict[str, Any] = {name: getattr(table, name) for name in columns}
    taken: dict[str, Any] = {name: None if column is None else column[sure] for name, column in kept.items()}
    return replace(table, **taken)


def _left_out(kind: str, why: str, count: int, total: int) -> list[Finding]:
    return [Finding(kind, "whole table", f"{count} of {total} points", f"left out: {why}")] if count else []


def _seen(spec: RunSpec, rig: Rig, table: Table) -> list[Finding]:
    points = len(table.frequency)
    if points < _FEWEST:
        raise RecordError(
            "too few frequencies in this table",
            where=str(spec.file),
            found=f"{points} usable points",
            expected=f"at least {_FEWEST}, and some twenty for intervals that help",
            advice="measure at more frequencies, below and above those at which the loop will work",
        )
    span = f"{table.span[0]:.4g} to {table.span[1]:.4g} rad/s"
    if table.phase is None:
        return [_magnitudes_only(spec, rig, span)]
    risen = float(np.unwrap(table.phase)[-1] - np.unwrap(table.phase)[0])
    if risen > 0.5 * np.pi:
        size = f"rises by {np.degrees(risen):.0f} deg over {span}"
        return [Finding("phase rises", "whole table", size, "a lag is negative here: give scale = -1.0", "holds")]
    return []


def _magnitudes_only(spec: RunSpec, rig: Rig, span: str) -> Finding:
    """What magnitudes can't fix holds the job, unless another fit run fixes it."""
    others = [run for run in rig.runs if run.use == "fit" and (run.excitation != KIND or "phase" in run.signals)]
    missing = "sign of the gain, dead time, and whether a zero lies left or right"
    if others or spec.use != "fit":
        told = others[0].shown if others else "the fit"
        return Finding("magnitudes only", span, f"no {missing}", f"taken from {told}")
    action = "add the phase, or a fit run in time (a step tells all of it)"
    return Finding("magnitudes only", span, f"no {missing}", action, "holds")


def _columns_sha256(columns: dict[str, FloatArray]) -> str:
    digest = hashlib.sha256()
    for role in TABLE_ROLES:
        if role in columns:
            digest.update(role.encode())
            digest.update(np.ascontiguousarray(columns[role] + 0.0, dtype="<f8").tobytes())
    return digest.hexdigest()
