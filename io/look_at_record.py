"""The health of one run as its spec has it: which looks count, and which of them stop what."""

from dataclasses import replace

from ..ident.health.look import Looked, look_at
from ..ident.health.seen import Seen
from ..ident.health.unexcited_loop import see_unexcited_loop
from ..ident.run import FloatArray
from . import units
from .rigfile.rig import Rig, RunSpec, Signal

_NO_EXCITATION = {"idle command", "dead response", "closed loop without excitation"}
# There the response moves the command, and rightly.
_RIGHT_IN_CLOSED_LOOP = {"command and response swapped", "actuator did not follow"}


def looked_at(
    spec: RunSpec,
    rig: Rig,
    time: FloatArray,
    command: FloatArray,
    response: FloatArray,
    *,
    setpoint: FloatArray | None,
    before: float | None,
) -> Looked:
    """Everything that can be wrong with the samples of one run.

    Parameters
    ----------
    spec : RunSpec
    rig : Rig
    time, command, response : (n,) arrays; s, command unit, response unit
        Of the window.
    setpoint : (n,) array or None, response unit
    before : float or None, command unit
        Steady command before the window.
    """
    ranges = {
        role: reading_range(spec.signals[role], wanted) if role in spec.signals else (None, None)
        for role, wanted in (("command", rig.command_unit), ("response", rig.response_unit))
    }
    looked = look_at(
        time,
        command,
        response,
        command_unit=rig.command_unit,
        response_unit=rig.response_unit,
        before=before,
        response_range=ranges["response"],
        command_range=ranges["command"],
    )
    seen = looked.seen
    if spec.loop == "closed":
        interval = rig.setting.update_interval
        own = see_unexcited_loop(time, command, looked.response, setpoint, rig.response_unit, interval)
        seen = (*own, *(each for each in seen if each.kind not in _RIGHT_IN_CLOSED_LOOP))
    return Looked(looked.response, _softened(spec, seen))


def _softened(spec: RunSpec, seen: tuple[Seen, ...]) -> tuple[Seen, ...]:
    """A held-out run without excitation stops nothing: it just can't confirm."""
    if spec.use == "fit":
        return seen
    return tuple(
        replace(each, refuses="holds") if each.kind in _NO_EXCITATION and each.refuses == "stops" else each
        for each in seen
    )


def reading_range(signal: Signal, wanted: str) -> tuple[float | None, float | None]:
    """Ends of a sensor's or a command's range in the wanted unit, None where they are not stated."""
    if signal.unit is None:
        return signal.lowest, signal.highest
    ends = [
        None if end is None else units.convert_reading(end, signal.unit, wanted)
        for end in (signal.lowest, signal.highest)
    ]
    return ends[0], ends[1]
