"""The command of a log that has none: from its setpoint, its response and the gains in force."""

from dataclasses import dataclass

import numpy as np

from ..design.discretise import law_from_gains
from ..design.gains import Gains
from ..ident.errors import RecordError
from ..ident.law import Law
from ..ident.replay import filtered, integrates, replay
from ..ident.run import FloatArray
from .record import Finding
from .rigfile.rig import InForce, Rig, RunSpec

_EVEN = 0.1  # of an interval: how far a stamp may be from an even grid
_WHOLE = 0.01  # relative: update interval over a whole number of samples
_FEWEST = 5  # samples of rest that tell where a law without integral stood


@dataclass(frozen=True, eq=False)
class WorkedOut:
    """A command that was not logged.

    Attributes
    ----------
    command : (n,) array, command unit
    before : float, command unit
        Steady command before the log.
    late : float, s
        After its sample, the command moves.
    findings : tuple of Finding
    """

    command: FloatArray
    before: float
    late: float
    findings: tuple[Finding, ...]


def work_out_command(
    spec: RunSpec, rig: Rig, time: FloatArray, setpoint: FloatArray | None, response: FloatArray
) -> WorkedOut:
    """Run the gains in force over what the controller saw.

    Parameters
    ----------
    spec : RunSpec
        Of a closed loop, with its gains.
    rig : Rig
    time : (n,) array, s
        Of the whole log, from its first sample on.
    setpoint, response : (n,) arrays, response unit

    Raises
    ------
    RecordError
        The gains are not known, or the log is not taken at the controller's rate (or a whole multiple of it).
    """
    start = spec.command_before if spec.command_before is not None else rig.operating_command
    if spec.in_force is None or setpoint is None or start is None:
        raise RecordError(
            "this log has no command, and what made it is not known",
            where=str(spec.file),
            found="no command, and no gains, setpoint or steady command before the log",
            expected="all three of them",
            advice="state [runs.current] with its update_interval, signals.setpoint and before.command",
        )
    every = _samples_an_update(spec, spec.in_force, time)
    law = law_in_force(spec.in_force)
    lost = ~np.isfinite(response)
    seen = np.interp(time, time[~lost], response[~lost]) if lost.any() and not lost.all() else response
    goal = np.nan_to_num(setpoint, nan=float(setpoint[0]))
    rest = goal[0] if integrates(law) else _rest(goal, seen)
    seen = filtered(seen, rig.setting.response_filter_time, float(np.median(np.diff(time))))
    phase = _phase(goal, every)
    moved = replay(law, (goal - goal[0])[phase::every], (seen - rest)[phase::every])
    index = (np.arange(len(time)) - phase) // every
    command = start + np.where(index >= 0, moved[np.clip(index, 0, len(moved) - 1)], 0.0)
    findings = [_said(command, rig)]
    findings += _beyond(command, rig)
    return WorkedOut(command, float(start), rig.setting.computation_delay, tuple(findings))


def law_in_force(in_force: InForce) -> Law:
    """The difference equation of the gains, without a clamp; the derivative on the error where it was."""
    law = law_from_gains(in_force.gains, in_force.update_interval)
    if not in_force.derivative_on_error or in_force.gains.derivative == 0.0:
        return law
    whole = _unweighted(in_force.gains)
    even = law_from_gains(whole, in_force.update_interval)
    kick = [both - error for both, error in zip(even.response, even.setpoint, strict=True)]
    ahead = tuple(own + more for own, more in zip(law.setpoint, kick, strict=True))
    return Law(law.update_interval, law.command, ahead, law.response, law.memory)


def _unweighted(gains: Gains) -> Gains:
    return Gains("PID", gains.proportional, gains.integral, gains.derivative, gains.filter_time)


def _samples_an_update(spec: RunSpec, in_force: InForce, time: FloatArray) -> int:
    """How many samples of the log the controller's interval lasts."""
    interval = float(np.median(np.diff(time)))
    away = np.abs(time - interval * np.arange(len(time)) - time[0])
    ratio = in_force.update_interval / interval
    every = round(ratio)
    if np.max(away) <= _EVEN * interval and every >= 1 and abs(ratio - every) <= _WHOLE * every:
        return every
    raise RecordError(
        "the command can't be worked out from this log",
        where=str(spec.file),
        found=f"a sample each {interval:.6g} s, off an even grid by up to {np.max(away):.3g} s; "
        f"the controller works each {in_force.update_interval:.6g} s",
        expected="every sample that the controller saw, without gaps",
        advice="log in the controller, or log the command too",
    )


def _rest(goal: FloatArray, seen: FloatArray) -> float:
    """Mean response before the setpoint moves: where a law without integral stood."""
    moved = np.flatnonzero(goal != goal[0])
    still = seen[: int(moved[0]) if len(moved) else len(seen)]
    return float(np.mean(still)) if len(still) >= _FEWEST else float(seen[0])


def _phase(goal: FloatArray, every: int) -> int:
    """Which of the log's samples are the controller's own: those at which the setpoint moves, where they agree."""
    places = np.unique((np.flatnonzero(np.diff(goal) != 0.0) + 1) % every)
    return int(places[0]) if len(places) == 1 else 0


def _said(command: FloatArray, rig: Rig) -> Finding:
    span = f"{command.min():.4g} to {command.max():.4g} {rig.command_unit}"
    action = "worked out from the gains in force, and the plant's gain is as right as those are: log it if you can"
    return Finding("command not logged", "whole record", span, action)


def _beyond(command: FloatArray, rig: Rig) -> list[Finding]:
    """A command outside the limits was not sent as worked out."""
    low = -np.inf if rig.limits.command_lowest is None else rig.limits.command_lowest
    high = np.inf if rig.limits.command_highest is None else rig.limits.command_highest
    beyond = int(np.count_nonzero((command < low) | (command > high)))
    if not beyond:
        return []
    return [
        Finding(
            "worked-out command beyond its limits",
            "whole record",
            f"{beyond} samples outside {low:g} to {high:g} {rig.command_unit}",
            "the controller can't have sent it: take smaller steps of the setpoint, or log the command",
            "holds",
        )
    ]
