"""Units that contradict what the rig file or the log say elsewhere: ms read as s, degrees as radians."""

import numpy as np

from ..ident.run import FloatArray
from . import units
from .names import unit_in_name
from .record import Finding
from .rigfile.rig import Rig, RunSpec

FAR = 3.0  # spans of the limits beyond them
SLOWER = 200.0  # times the controller's interval


def unit_slips(spec: RunSpec, rig: Rig, time: FloatArray, response: FloatArray) -> list[Finding]:
    """What looks like the wrong unit.

    Parameters
    ----------
    spec : RunSpec
    rig : Rig
    time : (n,) array, s
    response : (n,) array, response unit
    """
    return [*_named_otherwise(spec, rig), *_beyond_limits(rig, response), *_slow(rig, time)]


def _named_otherwise(spec: RunSpec, rig: Rig) -> list[Finding]:
    """A source whose name ends in another unit of the same kind than the one it is read in."""
    found = []
    for role, signal in spec.signals.items():
        read_in = signal.unit or {"time": None, "command": rig.command_unit}.get(role, rig.response_unit)
        named = unit_in_name(signal.source or "")
        if named is None or read_in is None or signal.scale != 1.0 or not units.is_known(read_in):
            continue
        if units.same_kind(named, read_in) and not units.same_unit(named, read_in):
            found.append(
                Finding(
                    "unit slip",
                    f'signals.{role}, "{signal.source}"',
                    f'read in "{read_in}", while its name ends in "{named}"',
                    f'put unit = "{named}", or rename the channel',
                    "holds",
                )
            )
    return found


def _beyond_limits(rig: Rig, response: FloatArray) -> list[Finding]:
    """A response that lies far outside of the limits that the rig file states for it."""
    low, high = rig.limits.response_lowest, rig.limits.response_highest
    good = response[np.isfinite(response)]
    if low is None or high is None or not np.isfinite([low, high]).all() or len(good) == 0:
        return []
    middle, room = float(np.median(good)), FAR * (high - low)
    if low - room <= middle <= high + room:
        return []
    unit = rig.response_unit
    return [
        Finding(
            "unit slip",
            "whole record",
            f"the response is about {middle:.4g} {unit}, and its limits are {low:g} to {high:g} {unit}",
            "check the unit and the scale of signals.response, or the limits",
            "holds",
        )
    ]


def _slow(rig: Rig, time: FloatArray) -> list[Finding]:
    """A record far slower than the controller: milliseconds read as seconds look like that."""
    interval = float(np.median(np.diff(time)))
    update = rig.setting.update_interval
    if not interval >= SLOWER * update > 0.0:
        return []
    return [
        Finding(
            "record slower than the controller",
            "whole record",
            f"a sample each {interval:.4g} s, the controller works each {update:.4g} s",
            "check the unit of signals.time (ms read as s?); if both are right, a faster log would tell more",
        )
    ]
