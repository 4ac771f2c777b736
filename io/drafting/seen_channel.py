"""What a channel's name, unit and samples say about it, without knowing its role yet."""

from dataclasses import dataclass

import numpy as np

from ...ident.run import FloatArray
from .. import units
from ..names import unit_in_name, words_of
from ..readers.port import Channel
from ..samples import LARGEST


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
    def can_be_signal(self) -> bool:
        """Not a counter, and with readings: two numbers at least, none of them beyond any unit."""
        good = self.values[np.isfinite(self.values)]
        return len(good) > 1 and not self.counts and bool(np.all(np.abs(good) < LARGEST))

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
