"""A rig file to start from out of a frequency table: its columns by name and unit, each guess marked."""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from .. import units
from .seen_channel import SeenChannel
from .text import Drafted, comment, head, text

_FREQUENCY = {"f", "freq", "frequency", "frequencies", "omega", "hz", "w"}
_MAGNITUDE = {"mag", "magnitude", "amplitude", "ampl", "modulus", "gain", "size", "db"}
_PHASE = {"phase", "ph", "phi", "arg", "argument"}
_COHERENCE = {"coherence", "coh", "gamma", "gamma2"}
_ERROR = {"error", "err", "std", "sigma", "uncertainty", "unc", "of"}
_TIME = {"time", "t", "timestamp", "stamp", "clock", "elapsed"}
_MARK = "guessed = true"
# More than so much of a turn, in rad, in a column of phases without a unit: degrees.
_TURNS = 14.0


@dataclass(frozen=True)
class TableRoles:
    """Columns of a frequency table by role; frequency and magnitude are always among them."""

    columns: dict[str, SeenChannel]


def guess_table(channels: Sequence[SeenChannel]) -> TableRoles | None:
    """The columns of a frequency table; None where the channels look like a log in time.

    A table has a frequency that rises from above zero, a magnitude, and nothing called a time.
    """
    if any(set(channel.words) & _TIME for channel in channels):
        return None
    frequency = next((each for each in channels if _is_frequency(each)), None)
    if frequency is None:
        return None
    columns = {"frequency": frequency}
    for channel in channels:
        role = _role(set(channel.words))
        if channel is not frequency and role is not None and channel.can_be_signal:
            columns.setdefault(role, channel)
    return TableRoles(columns) if "magnitude" in columns else None


def _is_frequency(channel: SeenChannel) -> bool:
    good = channel.values[np.isfinite(channel.values)]
    if not channel.rises or len(good) < 3 or good[0] <= 0.0:
        return False
    unit = channel.unit or channel.suffix
    kinds = unit is not None and (units.same_kind(unit, "Hz") or units.same_kind(unit, "rad/s"))
    return kinds or bool(set(channel.words) & _FREQUENCY)


def _role(words: set[str]) -> str | None:
    if words & _COHERENCE:
        return "coherence"
    kind = "phase" if words & _PHASE else "magnitude" if words & _MAGNITUDE else None
    return f"{kind}_error" if kind and words & _ERROR else kind


def table_text(drafted: Drafted, roles: TableRoles) -> str:
    """The whole rig file.

    Parameters
    ----------
    drafted : Drafted
        Its roles in time are not looked at.
    roles : TableRoles
    """
    return "\n".join([*head(drafted), *_point(), *_run(drafted, roles), *_wishes()]) + "\n"


def _point() -> Iterator[str]:
    yield from ("", "[operating_point]             # a table does not tell where the rig stood")
    yield from ('command = "0"', 'response = "0"', _MARK, "", "[signals]")
    yield "# units of what the controller moves and of what it is to hold; 1 is a pure number"
    yield f'command = {{ unit = "1", {_MARK} }}'
    yield f'response = {{ unit = "1", {_MARK} }}'


def _run(drafted: Drafted, roles: TableRoles) -> Iterator[str]:
    yield from ("", "[[runs]]", f"file = {text(drafted.run)}", 'use = "fit"', 'excitation = "frequency-table"')
    for role, channel in roles.columns.items():
        unit, why = _unit(role, channel)
        good = channel.values[np.isfinite(channel.values)]
        yield comment(f"unit: {why}; {good.min():.6g} to {good.max():.6g} in this table")
        yield f"{role} = {{ source = {text(channel.name)}, unit = {text(unit)}, {_MARK} }}"
    if "phase" not in roles.columns:
        yield "# no phase was found: magnitudes alone leave sign and dead time open, and hold the job"
    yield from (_MARK, "", "# [[runs]]")
    yield '# file = "..."                # a fresh table or log that is never fitted; without one, nothing is released'
    yield '# use = "held-out"'


def _unit(role: str, channel: SeenChannel) -> tuple[str, str]:
    if channel.unit is not None:
        return channel.unit, "stated in the table"
    if channel.suffix is not None:
        return channel.suffix, "at the end of the name"
    if channel.name.casefold().endswith("db"):
        return "dB", "in the name"
    good = channel.values[np.isfinite(channel.values)]
    if role == "frequency":
        return "Hz", "not stated"
    if role == "magnitude":
        return ("dB", "not stated; it goes below zero") if good.min() < 0.0 else ("1", "not stated")
    if role.startswith("phase"):
        wide = role == "phase" and float(np.ptp(good)) > _TURNS
        return ("deg", "not stated; by its span") if wide else ("deg", "not stated: it may well be rad")
    return "1", "not stated"


def _wishes() -> Iterator[str]:
    yield from ("", "[controller]", 'update_interval = "10 ms"', _MARK)
    yield from ("", "[requirements]", 'test_step = "1"', 'overshoot = { at_most = "10 %" }')
    yield from ('phase_margin = { at_least = "45 deg" }', _MARK)
    yield from ("", "[limits]                     # put the hardware's in their place")
    yield 'command = { lowest = "-1", highest = "1" }'
    yield 'response = { lowest = "-10", highest = "10" }'
    yield _MARK
