"""The units of the logged signals: from the rig file, or from the first log where the rig file leaves it to that."""

from pathlib import Path

from ...ident.errors import RequestError
from .. import units
from ..readers.port import Hints, find_channel
from ..readers.registry import reader_of
from .messages import Problems
from .rig import LogDialect
from .runs import signals_of
from .schema import RigFile, SignalPart
from .table_runs import is_table


def rig_units(shape: RigFile, files: list[list[Path]], dialect: LogDialect, problems: Problems) -> dict[str, str]:
    """Unit of command, response and setpoint by role; every stated unit is checked on the way.

    Returns
    -------
    dict of role to unit as written; "setpoint" has the response's.
    """
    _check_stated(shape, problems)
    problems.raise_any()
    found = {
        role: problems.attempt(f"signals.{role}.unit", lambda role=role: _unit_of(role, shape, files, dialect), "1")  # type: ignore[misc]
        for role in ("command", "response")
    }
    for role, unit in found.items():
        if units.is_known(unit) and units.same_kind(unit, "dB"):
            problems.add(f"signals.{role}.unit", "a level in dB is not a reading", f'"{unit}"', "a linear unit")
    return {**found, "setpoint": found["response"]}


def _check_stated(shape: RigFile, problems: Problems) -> None:
    base = signals_of(shape.signals)
    for role, part in base.items():
        _check_unit(f"signals.{role}.unit", role, part, base, problems)
    for number, run in enumerate(shape.runs, 1):
        if run.signals is not None:
            for role in run.signals.model_fields_set & base.keys():
                merged = signals_of(shape.signals, run).get(role)
                if merged is not None and merged.unit != base[role].unit:
                    _check_unit(f"runs[{number}].signals.{role}.unit", role, merged, base, problems)


def _check_unit(key: str, role: str, part: SignalPart, base: dict[str, SignalPart], problems: Problems) -> None:
    if part.unit is None:
        return
    wanted = "s" if role == "time" else base[role].unit
    if role == "setpoint" and base["response"].unit is not None:
        wanted = base["response"].unit
    problems.attempt(key, lambda: _require(part.unit or "", wanted), None)


def _require(unit: str, wanted: str | None) -> None:
    units.require_known(unit)
    if wanted is not None and units.is_known(wanted):
        units.difference_factor(unit, wanted)


def _unit_of(role: str, shape: RigFile, files: list[list[Path]], dialect: LogDialect) -> str:
    """The stated unit; else the first log's.

    Raises
    ------
    RequestError
        When neither states one that is known.
    """
    stated: str | None = getattr(shape.signals, role).unit
    if stated is not None:
        return stated
    for run, found in zip(shape.runs, files, strict=True):
        part = None if is_table(run) else signals_of(shape.signals, run).get(role)
        if found and part is not None and part.source is not None:
            return part.unit or _unit_in_log(found[0], part.source, Hints(dialect, run.group))
    raise RequestError("no source and no unit", expected='such as { source = "column name", unit = "mm" }')


def _unit_in_log(file: Path, source: str, hints: Hints) -> str:
    info = find_channel(file, source, reader_of(file).channels(file, hints))
    if info.unit is None:
        raise RequestError(
            f"neither the rig file nor the log {file.name} states a unit",
            found=f'source "{source}"',
            expected='unit = "mm", for instance; "1" for a pure number',
        )
    units.require_known(info.unit)
    return info.unit
