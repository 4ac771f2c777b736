"""The signals of one run out of its log: roles, units and the time, as arrays in rig units."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ..ident.errors import RecordError, RequestError
from ..ident.run import FloatArray
from . import units
from .readers.port import Channel, Log
from .rigfile.rig import Rig, RunSpec, Signal

LARGEST = 1e100  # of a reading: squares and sums of larger ones overflow
_LARGEST_SECONDS = 1e11  # the year 5138 as a stamp in s: a larger one is in a smaller unit


@dataclass(frozen=True, eq=False)
class Samples:
    """The samples of one run, all arrays (n,): time in s, signals in rig units, and command and response as logged."""

    time: FloatArray
    command: FloatArray
    response: FloatArray
    setpoint: FloatArray | None
    logged_command: FloatArray  # its setpoint where the command is not logged
    logged_response: FloatArray

    def take(self, chosen: "NDArray[np.intp] | NDArray[np.bool_] | slice") -> "Samples":
        """The chosen ones."""
        setpoint = None if self.setpoint is None else self.setpoint[chosen]
        return Samples(
            self.time[chosen],
            self.command[chosen],
            self.response[chosen],
            setpoint,
            self.logged_command[chosen],
            self.logged_response[chosen],
        )


@dataclass(frozen=True)
class Begun:
    """Where a log began of which a later part is at hand.

    Attributes
    ----------
    samples : int
        Before this part.
    stamp : float or None, in the unit of the time's source
        The first of all.
    """

    samples: int
    stamp: float | None


def begin(spec: RunSpec, log: Log) -> Begun:
    """What later parts need to know of the first one."""
    signal = spec.signals["time"]
    if signal.source is None:
        return Begun(0, None)
    stamps = _kept(signal, log.channels[str(signal.source)].values)
    finite = stamps[np.isfinite(stamps)]
    return Begun(0, float(finite[0]) if len(finite) else None)


def samples_of(spec: RunSpec, rig: Rig, log: Log, begun: Begun | None = None) -> Samples:
    """The samples of a log, or of a part of one, in rig units.

    Parameters
    ----------
    spec : RunSpec
    rig : Rig
    log : Log
    begun : Begun or None
        Where the log began, for a later part of it; its times then count from there.

    Raises
    ------
    RecordError, RequestError
        When the units, the stamps or the clocks contradict each other, or a reading is too large to be one.
    """
    with np.errstate(over="ignore", invalid="ignore"):  # what overflows is refused below
        samples = _samples(spec, rig, log, begun)
    for role in ("time", "command", "response", "setpoint"):
        _require_bounded(spec, role, getattr(samples, role))
    return samples


def _samples(spec: RunSpec, rig: Rig, log: Log, begun: Begun | None) -> Samples:
    where = str(spec.file)
    response = _reading(where, "response", spec.signals["response"], log, rig.response_unit)
    setpoint = None
    if "setpoint" in spec.signals:
        setpoint = _reading(where, "setpoint", spec.signals["setpoint"], log, rig.response_unit)
    command = np.zeros(len(response))  # until it is worked out
    if "command" in spec.signals:
        command = _reading(where, "command", spec.signals["command"], log, rig.command_unit)
    time = _time(where, spec.signals["time"], log, len(response), begun or Begun(0, None))
    _require_one_clock(where, spec, log, time)
    cause = "command" if "command" in spec.signals else "setpoint"
    logged = {role: log.channels[str(spec.signals[role].source)].values for role in (cause, "response")}
    return Samples(time, command, response, setpoint, logged[cause], logged["response"])


def _require_bounded(spec: RunSpec, role: str, values: FloatArray | None) -> None:
    if values is None or not np.any(np.abs(values) > LARGEST):
        return
    sample = int(np.flatnonzero(np.abs(values) > LARGEST)[0])
    raise RecordError(
        f"the {role} holds a number that is too large for a reading",
        where=f"{spec.file}, sample {sample + 1}",
        found=f"{values[sample]:.6g} after scale, offset and unit",
        expected=f"at most {LARGEST:g}",
        advice="if it stands for a lost sample, name it in lost_as; else look at scale and offset in the rig file",
    )


def _reading(where: str, role: str, signal: Signal, log: Log, wanted: str) -> FloatArray:
    """(n,) readings in the rig's unit; NaN where lost."""
    channel = log.channels[str(signal.source)]
    if channel.stamps:
        raise RequestError(
            f"the {role}'s source holds dates or clock times",
            where=where,
            found=f'"{signal.source}"',
            expected="a column of numbers",
        )
    values = signal.scale * _kept(signal, channel.values) + signal.offset
    scale, offset = units.reading_conversion(_unit(where, role, signal, channel), wanted)
    return values if (scale, offset) == (1.0, 0.0) else scale * values + offset


def _unit(where: str, role: str, signal: Signal, channel: Channel) -> str:
    """The unit of a reading; the rig file and the log must not contradict each other.

    Raises
    ------
    RequestError
    """
    stated, logged = signal.unit, channel.unit
    raw = signal.scale == 1.0 and signal.offset == 0.0
    if stated is None and logged is None:
        raise RequestError(
            f"neither the rig file nor this log states the unit of the {role}",
            where=where,
            found=f'source "{signal.source}"',
            expected=f"a unit under signals.{role} in the rig file",
        )
    if stated is None:
        units.require_known(str(logged))
        return str(logged)
    if logged is not None and raw and units.is_known(logged) and not units.same_unit(stated, logged):
        raise RequestError(
            f"the rig file and this log state different units of the {role}",
            where=where,
            found=f'rig file "{stated}", log "{logged}" for "{signal.source}"',
            expected="one unit",
            advice=f"leave signals.{role}.unit out to take the log's, or give scale if the log is wrong",
        )
    return stated


def _time(where: str, signal: Signal, log: Log, count: int, begun: Begun) -> FloatArray:
    """(n,) array, s, as logged (not from zero yet)."""
    if signal.sample_rate is not None:
        return np.asarray((begun.samples + np.arange(count)) / signal.sample_rate, dtype=np.float64)
    channel = log.channels[str(signal.source)]
    if channel.stamps:
        return channel.values
    if channel.clock is not None and not str(signal.source).endswith("/time"):
        return channel.clock
    values = _kept(signal, channel.values)
    finite = values[np.isfinite(values)]
    unit = _unit(where, "time", signal, channel)
    factor = signal.scale * units.difference_factor(unit, "s")
    if len(finite) and abs(finite[0]) * abs(factor) > _LARGEST_SECONDS:
        raise RequestError(
            "the time stamps are too large for their unit",
            where=where,
            found=f'{finite[0]:.6g} in "{unit}"',
            expected="a stamp of this millennium",
            advice='stamps near 1.7e12 are in "ms", near 1.7e15 in "us", near 1.7e18 in "ns"',
        )
    if len(finite) == 0:
        return values
    return (values - (finite[0] if begun.stamp is None else begun.stamp)) * factor


def _kept(signal: Signal, values: FloatArray) -> FloatArray:
    """(n,) array with NaN where the rig file says that a value stands for a lost sample."""
    return np.where(np.isin(values, signal.lost_as), np.nan, values) if signal.lost_as else values


def _require_one_clock(where: str, spec: RunSpec, log: Log, time: FloatArray) -> None:
    """Channels that keep their own time must all keep the same.

    Raises
    ------
    RecordError
    """
    steps = np.diff(time)
    if not np.any(np.isfinite(steps)):
        return
    interval = float(np.nanmedian(steps))
    for role in ("command", "response", "setpoint"):
        if role not in spec.signals:
            continue
        channel = log.channels[str(spec.signals[role].source)]
        if channel.clock is None or spec.signals["time"].source is None:
            continue
        own = channel.clock - channel.clock[0]
        apart = np.abs(own - (time - time[0]))
        largest = float(np.max(apart[np.isfinite(apart)], initial=0.0))
        if largest > 0.01 * abs(interval) + 1e-9:
            raise RecordError(
                f"the {role} keeps another time than the time's source",
                where=where,
                found=f'"{channel.name}" differs by {largest:.3g} s',
                expected="all signals sampled at the same times",
                advice="log all signals with one clock",
            )
