"""What one channel of a log holds, summed up as it is read, part by part."""

from dataclasses import dataclass

import numpy as np

from ..ident.run import FloatArray
from .samples import LARGEST


@dataclass(frozen=True)
class ChannelSummary:
    """One channel.

    Attributes
    ----------
    name : str
    unit : str or None
        As the log or the rig file states it.
    samples, lost : int
    lowest, highest : float or None, in `unit`
        None where every sample is lost.
    """

    name: str
    unit: str | None
    samples: int
    lost: int
    lowest: float | None
    highest: float | None


@dataclass(frozen=True)
class ClockSummary:
    """A channel that only ever rises, as a time does; in its own unit.

    Attributes
    ----------
    name : str
    step, shortest, longest : float
        Median, least and largest difference of neighbours; over many parts, the median of their medians.
    whole : float
        From the first value to the last.
    """

    name: str
    step: float
    shortest: float
    longest: float
    whole: float


class ChannelSum:
    """A channel on its way to its summary.

    Examples
    --------
    >>> total = ChannelSum("t", "s")
    >>> for part in ([0.0, 1.0], [2.0, 4.0]):
    ...     total.add(np.array(part))
    >>> total.channel
    ChannelSummary(name='t', unit='s', samples=4, lost=0, lowest=0.0, highest=4.0)
    >>> total.clock
    ClockSummary(name='t', step=1.25, shortest=1.0, longest=2.0, whole=4.0)
    """

    def __init__(self, name: str, unit: str | None) -> None:
        self._name, self._unit = name, unit
        self._samples = self._finite = 0
        self._lowest, self._highest = np.inf, -np.inf
        self._rises = True
        self._medians: list[float] = []
        self._shortest, self._longest = np.inf, -np.inf
        self._ends: tuple[float, float] | None = None

    def add(self, values: FloatArray) -> None:
        """The next part.

        Parameters
        ----------
        values : (n,) array
            NaN where a sample is lost.
        """
        finite = values[np.isfinite(values)]
        self._samples += values.size
        self._finite += finite.size
        if finite.size:
            self._lowest = min(self._lowest, float(finite.min()))
            self._highest = max(self._highest, float(finite.max()))
        if self._rises and values.size:
            self._follow(values)

    def _follow(self, values: FloatArray) -> None:
        begun = self._ends
        with np.errstate(over="ignore", invalid="ignore"):
            steps = np.diff(values) if begun is None else np.diff(values, prepend=begun[1])
        self._rises = bool(np.all((steps > 0) & (steps < LARGEST)))  # what rises by more is no time
        self._ends = (float(values[0]) if begun is None else begun[0], float(values[-1]))
        if self._rises and steps.size:
            self._medians.append(float(np.median(steps)))
            self._shortest = min(self._shortest, float(steps.min()))
            self._longest = max(self._longest, float(steps.max()))

    @property
    def channel(self) -> ChannelSummary:
        """What it holds so far."""
        ends = (self._lowest, self._highest) if self._finite else (None, None)
        return ChannelSummary(self._name, self._unit, self._samples, self._samples - self._finite, *ends)

    @property
    def clock(self) -> ClockSummary | None:
        """How it rises; None where it falls, stands, or has fewer than three values."""
        if not self._rises or self._samples < 3 or self._ends is None:
            return None
        step = float(np.median(self._medians))
        return ClockSummary(self._name, step, self._shortest, self._longest, self._ends[1] - self._ends[0])


def summed(name: str, unit: str | None, values: FloatArray) -> ChannelSum:
    """A channel that is at hand whole."""
    total = ChannelSum(name, unit)
    total.add(values)
    return total
