"""The text of a drafted rig file: every guess with its ground in a comment, and marked `guessed = true`."""

import json
from collections.abc import Iterator
from dataclasses import dataclass
from math import floor, log10

import numpy as np

from .. import units
from ..rigfile.rig import LogDialect
from ..unit_names import AMBIGUOUS
from .roles import Role, Roles
from .seen_channel import SeenChannel

_STAMPS = ((1e17, "ns"), (1e14, "us"), (1e11, "ms"))  # seconds since 1970 are near 1.7e9
_LOST = (-9999.0, -999.0, -99999.0, 9999.0, 9.9e37)
_MARK = "guessed = true"


@dataclass(frozen=True)
class Drafted:
    """What a draft is written from.

    Attributes
    ----------
    run : str
        The log, as the rig file will name it.
    name : str
        Of the rig.
    reader : str
        What the log was read as.
    dialect : LogDialect or None
        Of a text log.
    roles : Roles or None
        None: the log is a frequency table.
    """

    run: str
    name: str
    reader: str
    dialect: LogDialect | None
    roles: Roles | None


def draft_text(drafted: Drafted) -> str:
    """The whole rig file.

    Parameters
    ----------
    drafted : Drafted
    """
    roles = drafted.roles
    if roles is None:
        raise ValueError("a frequency table is drafted by `table_text`")
    return "\n".join([*head(drafted), *_signals(roles), *_runs(drafted), *_wishes(roles)]) + "\n"


def text(value: str) -> str:
    """A TOML string.

    Examples
    --------
    >>> text('pos "A"')
    '"pos \\\\"A\\\\""'
    """
    return json.dumps(value, ensure_ascii=False).replace("\x7f", "\\u007f")


def comment(value: str) -> str:
    """A comment line of TOML, signs that do not print left out."""
    return "# " + "".join(sign if sign.isprintable() else " " for sign in value)


def head(drafted: Drafted) -> Iterator[str]:
    """What the file was drafted from, the rig's name, and the dialect of a text log."""
    yield comment(f"Drafted from {drafted.run}, read as {drafted.reader}. Every `guessed = true` holds the job:")
    yield "# look at the line, put it right, and remove the mark."
    yield ""
    yield "[rig]"
    yield f"name = {text(drafted.name)}"
    yield _MARK
    if drafted.dialect is not None:
        yield ""
        yield "[log]"
        said = drafted.dialect
        for key in ("separator", "decimal", "encoding"):
            value = getattr(said, key)
            if value is not None:
                yield f"{key} = {text(value)}"
        yield _MARK


def _signals(roles: Roles) -> Iterator[str]:
    yield ""
    yield "[signals]"
    yield from _time_line(roles.time)
    for name in ("command", "response", "setpoint"):
        role: Role | None = getattr(roles, name)
        if role is not None:
            yield from _signal_line(name, role)
    if roles.others:
        yield comment("not used: " + ", ".join(each.name for each in roles.others[:20]))


def _time_line(role: Role | None) -> Iterator[str]:
    if role is None:
        yield "# no channel runs like a time; state the rate at which the logger sampled"
        yield 'time = { sample_rate = "1 kHz", guessed = true }'
        return
    unit, why = time_unit(role.channel)
    yield comment(f"{role.why}; unit: {why}")
    stated = "" if role.channel.stamps else f", unit = {text(unit)}"
    yield f"time = {{ source = {text(role.channel.name)}{stated}, {_MARK} }}"


def time_unit(channel: SeenChannel) -> tuple[str, str]:
    """Unit of a time and the ground for it."""
    if channel.stamps or channel.clock:
        return "s", "read as s"
    if channel.unit is not None:
        return channel.unit, "stated in the log"
    if channel.suffix is not None and units.same_kind(channel.suffix, "s"):
        return channel.suffix, "at the end of the name"
    good = channel.values[np.isfinite(channel.values)]
    for least, unit in _STAMPS:
        if good[0] > least:
            return unit, "by the size of the stamps, counted from 1970"
    step = float(np.median(np.diff(good)))
    if step >= 1.0 and np.all(good == np.round(good)):
        return "s", f'not stated. Whole numbers, {step:g} a sample: they may well be "ms"'
    return "s", f"not stated; {step:.4g} a sample"


def _signal_line(name: str, role: Role) -> Iterator[str]:
    channel = role.channel
    unit, why = signal_unit(channel)
    low, high = _ends(channel)
    yield comment(f"{role.why}; unit: {why}; {low:.6g} to {high:.6g} in this log")
    lost = [value for value in _LOST if _is_lost_mark(channel, value)]
    more = f", lost_as = [{', '.join(f'{value!r}' for value in lost)}]" if lost else ""
    yield f"{name} = {{ source = {text(channel.name)}, unit = {text(unit)}{more}, {_MARK} }}"


def signal_unit(channel: SeenChannel) -> tuple[str, str]:
    """Unit of a signal and the ground for it."""
    if channel.unit is not None:
        return channel.unit, "stated in the log"
    if channel.stated in AMBIGUOUS:
        meant = {"C": "degC", "F": "degF"}.get(channel.stated or "")
        said = f'the log says "{channel.stated}", which means two things: {AMBIGUOUS[channel.stated or ""]}'
        return meant or "1", said
    if channel.stated:
        return "1", f'the log says "{channel.stated}", which is not known here'
    if channel.suffix is not None:
        return channel.suffix, "at the end of the name"
    return "1", "not stated; 1 is a pure number"


def _ends(channel: SeenChannel) -> tuple[float, float]:
    marks = [value for value in _LOST if _is_lost_mark(channel, value)]
    good = channel.values[np.isfinite(channel.values)]
    kept = good[~np.isin(good, marks)]
    chosen = kept if len(kept) else good
    return float(chosen.min()), float(chosen.max())


def _is_lost_mark(channel: SeenChannel, value: float) -> bool:
    """A value that loggers write for a lost sample, far outside of all others."""
    good = channel.values[np.isfinite(channel.values)]
    rest = good[good != value]
    if len(rest) == len(good) or len(rest) < 10:
        return False
    span = float(np.ptp(rest))
    return bool(value < rest.min() - 3.0 * span or value > rest.max() + 3.0 * span)


def _runs(drafted: Drafted) -> Iterator[str]:
    yield ""
    yield "[[runs]]"
    yield f'file = {text(drafted.run)}             # a name, or a pattern such as "step_*.csv"'
    yield 'use = "fit"'
    yield 'loop = "open"                # as far as one log can tell'
    yield _MARK
    yield ""
    yield "# [[runs]]"
    yield '# file = "..."                # a fresh run that is never fitted; without one, nothing is released'
    yield '# use = "held-out"'


def _wishes(roles: Roles) -> Iterator[str]:
    command, response = roles.command.channel, roles.response.channel
    unit, reads = signal_unit(command)[0], signal_unit(response)[0]
    low, high = _ends(response)
    yield from (
        "",
        "[controller]",
        f"update_interval = {text(_interval(roles))}      # of the controller; here that of the log",
    )
    yield from ('# computation_delay = "1 ms" # from reading the response to moving the command', _MARK)
    yield from ("", "[requirements]")
    yield f"test_step = {text(_quantity(_round(0.25 * (high - low)), reads))}"
    yield 'overshoot = { at_most = "10 %" }'
    yield '# settling_time = { at_most = "...", band = "2 %" }'
    yield 'phase_margin = { at_least = "45 deg" }'
    yield _MARK
    yield from ("", "[limits]                     # here the extremes of this log: put the hardware's in their place")
    lowest, highest = _ends(command)
    yield f"command = {{ lowest = {text(_quantity(lowest, unit))}, highest = {text(_quantity(highest, unit))} }}"
    yield f"response = {{ lowest = {text(_quantity(low, reads))}, highest = {text(_quantity(high, reads))} }}"
    yield _MARK


def _interval(roles: Roles) -> str:
    if roles.time is None:
        return "1 ms"
    if roles.time.channel.clock:
        return "10 ms"
    good = roles.time.channel.values[np.isfinite(roles.time.channel.values)]
    return _quantity(float(np.median(np.diff(good))), time_unit(roles.time.channel)[0])


def _round(value: float) -> float:
    """To two digits.

    Examples
    --------
    >>> _round(0.01234)
    0.012
    """
    return round(value, 1 - floor(log10(abs(value)))) if value else 1.0


def _quantity(value: float, unit: str) -> str:
    return f"{value:.6g}" if unit == "1" else f"{value:.6g} {unit}"
