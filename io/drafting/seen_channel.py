"""What a channel's name, unit and samples say about it, without knowing its role yet."""

import re
from dataclasses import dataclass

import numpy as np

from ...ident.run import FloatArray
from .. import units
from ..readers.port import Channel

_WORDS = re.compile(r"[A-Z]?[a-z]+|[A-Z]+(?![a-z])|\d+|[^\W\d_]+")
_LAST = re.compile(r"[^\s_./-]+$")
# units that a name may end in; single letters that also number channels are left out
_SUFFIX_UNITS = re.compile(
    r"(?:s|ms|us|ns|min|h|V|mV|kV|A|mA|mm|cm|um|m|degC|degF|K|rpm|bar|mbar|kPa|Pa|N|kN|Nm|deg|rad|mrad|Hz|W|kW|pct|g0)"
)


@dataclass(frozen=True, eq=False)
class SeenChannel:
    """One channel of an unknown log.

    Attributes
    ----------
    name : str
        As a rig file's `source`.
    words : tuple of str
        The name's words, lower case: "drive", "v".
    values : (n,) array
        NaN where lost.
    unit : str or None
        Known unit that the log states.
    stated : str or None
        The unit as the log writes it, known or not.
    suffix : str or None
        Known unit that the name ends in.
    stamps : bool
        Date or clock texts, read as s.
    clock : bool
        The channel keeps its own time.
    """

    name: str
    words: tuple[str, ...]
    values: FloatArray
    unit: str | None
    stated: str | None
    suffix: str | None
    stamps: bool
    clock: bool

    @property
    def rises(self) -> bool:
        """Nearly every sample is above the one before, as in a time or a counter."""
        steps = np.diff(self.values[np.isfinite(self.values)])
        return len(steps) > 2 and bool(np.mean(steps > 0.0) > 0.9 and np.all(steps >= 0.0))

    @property
    def group(self) -> str:
        """What stands before the last slash of a path."""
        return self.name.rpartition("/")[0]

    @property
    def counts(self) -> bool:
        """Whole numbers that go up by one."""
        return self.rises and bool(np.all(np.diff(self.values) == 1.0))

    @property
    def moves(self) -> bool:
        """More than one value."""
        good = self.values[np.isfinite(self.values)]
        return len(good) > 2 and bool(np.ptp(good) > 0.0)

    @property
    def standing(self) -> float:
        """Share of the samples that equal the one before: near 1 for a command of steps."""
        good = self.values[np.isfinite(self.values)]
        return float(np.mean(np.diff(good) == 0.0)) if len(good) > 1 else 1.0


def seen_channel(channel: Channel) -> SeenChannel:
    """Look at one channel as read.

    Parameters
    ----------
    channel : Channel
    """
    unit = channel.unit if channel.unit is not None and units.is_known(channel.unit) else None
    return SeenChannel(
        name=channel.name,
        words=words_of(channel.name),
        values=channel.values,
        unit=unit,
        stated=channel.unit,
        suffix=unit_in_name(channel.name),
        stamps=channel.stamps,
        clock=channel.clock is not None,
    )


def words_of(name: str) -> tuple[str, ...]:
    """The words of a name, split at signs, digits and capitals.

    Examples
    --------
    >>> words_of("/rig/driveVolts_2")
    ('rig', 'drive', 'volts', '2')
    """
    return tuple(word.lower() for word in _WORDS.findall(name))


def unit_in_name(name: str) -> str | None:
    """A unit at the end of a name, after a sign that parts it from the rest.

    Examples
    --------
    >>> unit_in_name("drive_V"), unit_in_name("pos"), unit_in_name("t_ms")
    ('V', None, 'ms')
    """
    last = _LAST.search(name)
    if last is None or last.start() == 0 or not _SUFFIX_UNITS.fullmatch(last.group()):
        return None
    return "%" if last.group() == "pct" else last.group()
