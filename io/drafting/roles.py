"""Which channel is the time, which the command, which the response, which the setpoint: by name, unit and samples."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from ...ident.errors import RecordError
from ...ident.health.swapped import foretelling
from .. import units
from .seen_channel import SeenChannel

_TIME = {
    "time", "t", "timestamp", "stamp", "clock", "elapsed", "seconds", "sec", "secs", "millis", "zeit", "temps", "tid",
}  # fmt: skip
# how strongly a word tells, 1 to 4
_COMMAND = {
    "command": 3, "cmd": 3, "pwm": 3, "duty": 3, "throttle": 3, "excitation": 3, "dac": 3, "drive": 2, "u": 2,
    "control": 2, "ctrl": 2, "actuator": 2, "valve": 2, "heater": 2, "heating": 2, "input": 2, "mv": 2, "co": 2,
    "op": 2, "demand": 2, "act": 1, "in": 1, "output": 1, "out": 1, "volts": 1, "voltage": 1, "power": 1, "current": 1,
    "pump": 1, "fan": 1, "motor": 1,
}  # fmt: skip
_RESPONSE = {
    "response": 3, "meas": 3, "measured": 3, "measurement": 3, "pv": 3, "sensor": 3, "feedback": 3, "actual": 3,
    "reading": 3, "encoder": 3, "adc": 3, "probe": 3, "y": 2, "position": 2, "pos": 2, "temperature": 2, "temp": 2,
    "level": 2, "flow": 2, "pressure": 2, "speed": 2, "velocity": 2, "angle": 2, "fb": 2, "displacement": 2,
    "height": 2, "thickness": 2, "tilt": 2, "force": 2, "distance": 2, "rpm": 1, "torque": 1, "output": 1, "out": 1,
}  # fmt: skip
_SETPOINT = {
    "setpoint": 4, "sp": 4, "target": 4, "desired": 4, "wanted": 4, "soll": 4, "reference": 3, "ref": 3, "wish": 3,
    "set": 2, "nominal": 2,
}  # fmt: skip
_CONTROL_UNITS = ("V", "A", "%")
MOST_TRIED = 10


@dataclass(frozen=True)
class Role:
    """One guessed role.

    Attributes
    ----------
    channel : SeenChannel
    why : str
        The ground for the guess, for the person who confirms it.
    """

    channel: SeenChannel
    why: str


@dataclass(frozen=True)
class Roles:
    """The guessed roles; a time of None means that no channel runs like one.

    Attributes
    ----------
    others : tuple of SeenChannel
        Channels with no role.
    """

    time: Role | None
    command: Role
    response: Role
    setpoint: Role | None
    others: tuple[SeenChannel, ...]


def guess_roles(channels: Sequence[SeenChannel], where: str) -> Roles:
    """Guess the roles of a log's channels.

    Parameters
    ----------
    channels : sequence of SeenChannel
    where : str
        The file, for messages.

    Raises
    ------
    RecordError
        When fewer than two channels hold a signal.
    """
    clocks = [each for each in channels if each.stamps or (each.rises and _time_score(each) > 0.0)]
    signals = [each for each in channels if not any(each is clock for clock in clocks) and each.can_be_signal]
    if len(signals) < 2:
        raise RecordError(
            "this log doesn't hold a command and a response",
            where=where,
            found=", ".join(f'"{each.name}"' for each in channels) or "no channel",
            expected="a time and two channels of numbers at least",
            advice="log what the controller will move and what it will hold, side by side",
        )
    setpoint = _setpoint(signals)
    rest = [each for each in signals if setpoint is None or each is not setpoint.channel]
    command, response = _pair(_likeliest(rest))
    time = _time(clocks, command.channel)
    taken = [role.channel for role in (time, command, response, setpoint) if role is not None]
    others = tuple(each for each in channels if not any(each is one for one in taken))
    return Roles(time, command, response, setpoint, others)


def _time_score(channel: SeenChannel) -> float:
    if channel.stamps:
        return 10.0
    unit = channel.unit or channel.suffix
    named = 3.0 * bool(set(channel.words) & _TIME) + 3.0 * (unit is not None and units.same_kind(unit, "s"))
    return named + 2.0 - 4.0 * (channel.counts and not named)


def _time(clocks: Sequence[SeenChannel], command: SeenChannel) -> Role | None:
    """The likeliest clock, one of the command's length and group first."""
    if command.clock:
        return Role(command, "the channel keeps its own time")
    fitting = [each for each in clocks if len(each.values) == len(command.values)]
    if not fitting:
        return None
    best = max(fitting, key=lambda each: _time_score(each) + 2.0 * (each.group == command.group))
    if best.stamps:
        return Role(best, "holds dates or clock times")
    named = "named like a time and " if set(best.words) & _TIME else ""
    return Role(best, f"{named}always rising")


def _named(channel: SeenChannel, table: dict[str, int]) -> int:
    return max((table.get(word, 0) for word in channel.words), default=0)


def _setpoint(signals: Sequence[SeenChannel]) -> Role | None:
    """By its name only, and only where command and response are left."""
    if len(signals) < 3:
        return None
    best = max(signals, key=lambda each: _named(each, _SETPOINT))
    return Role(best, "named like a setpoint") if _named(best, _SETPOINT) >= 3 else None


def _likeliest(signals: Sequence[SeenChannel]) -> list[SeenChannel]:
    """At most ten channels: those that move, the ones with a telling name first."""
    order = sorted(signals, key=lambda each: (not each.moves, -max(_named(each, _COMMAND), _named(each, _RESPONSE))))
    return order[:MOST_TRIED]


def _pair(signals: Sequence[SeenChannel]) -> tuple[Role, Role]:
    """The most likely pair: what names say, and which of both foretells the other."""
    best, found = -np.inf, None
    for command in signals:
        for response in signals:
            if command is not response:
                data = _from_samples(command, response)
                score = _names_score(command, response) + data
                if score > best:
                    best, found = score, (command, response, data)
    assert found is not None
    command, response, data = found
    seen = "its samples foretell the response's" if data >= 1.5 else "its samples do not say"
    by_name = f"the name says so ({_named(command, _COMMAND)} of 3)" if _named(command, _COMMAND) else "by elimination"
    answers = "it follows the command" if data >= 1.5 else "no clear relation to the command was seen"
    named = (
        f"the name says so ({_named(response, _RESPONSE)} of 3)" if _named(response, _RESPONSE) else "by elimination"
    )
    return Role(command, f"{by_name}; {seen}"), Role(response, f"{named}; {answers}")


def _names_score(command: SeenChannel, response: SeenChannel) -> float:
    score = 0.0 + _named(command, _COMMAND) - _named(command, _RESPONSE)
    score += _named(response, _RESPONSE) - _named(response, _COMMAND)
    score += 1.5 * (command.group == response.group)
    score += (command.unit or command.suffix) in _CONTROL_UNITS
    return score - float((response.unit or response.suffix) in _CONTROL_UNITS)


def _from_samples(command: SeenChannel, response: SeenChannel) -> float:
    """-4 to 4: constants can be neither; a command stands still often, and foretells its response."""
    if not command.moves or not response.moves:
        return -4.0
    count = min(len(command.values), len(response.values))
    mine, other = command.values[:count], response.values[:count]
    good = np.isfinite(mine) & np.isfinite(other)
    if np.count_nonzero(good) < 30:
        return 0.0
    ahead, behind = foretelling(mine[good], other[good]), foretelling(other[good], mine[good])
    leads = np.clip(10.0 * (max(ahead, 0.0) - max(behind, 0.0)), -3.0, 3.0)
    return float(leads + 1.0 * (command.standing > response.standing))
