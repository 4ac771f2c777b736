"""Looks at a long record part by part: what can be seen from a sample and its neighbours, gathered over all parts."""

from dataclasses import dataclass

import numpy as np

from ..run import FloatArray
from .clipping import see_clipping, see_declared_clipping
from .clock import see_gaps
from .lost import MUCH_LOST, TOO_MUCH_LOST, see_spikes
from .seen import Refuses, Seen
from .stuck import see_stuck

BESIDE = 8  # samples on either side of a part that are looked at with it
# What the means over blocks can't show, or would show a second time.
SEEN_IN_PARTS = {"gap", "uneven sampling", "lost samples"}


@dataclass(frozen=True, eq=False)
class Part:
    """Samples that were looked at, lost ones taken out; all arrays (n,)."""

    time: FloatArray
    columns: FloatArray
    response: FloatArray


class PartsLook:
    """Local looks at a record that comes in parts.

    Parameters
    ----------
    response_unit : str
    response_range : (lowest, highest), each may be None
        Of the sensor.
    """

    def __init__(self, response_unit: str, response_range: tuple[float | None, float | None]) -> None:
        self._unit, self._range = response_unit, response_range
        self._waiting: FloatArray | None = None
        self._emitted = 0
        self._gathered: list[Seen] = []
        self._samples = self._lost = 0

    def add(self, time: FloatArray, command: FloatArray, response: FloatArray, columns: FloatArray) -> Part:
        """Look at the next samples; those that can be judged with neighbours on both sides come back.

        Parameters
        ----------
        time : (n,) array, s
            Increasing, later than all before.
        command, response : (n,) arrays
            NaN where a response is lost.
        columns : (n, k) array
            Whatever else belongs to the samples.
        """
        return self._look(np.column_stack([time, command, response, columns]), last=False)

    def end(self) -> Part | None:
        """The last samples; None where there are none."""
        return None if self._waiting is None else self._look(self._waiting[:0], last=True)

    def _look(self, rows: FloatArray, *, last: bool) -> Part:
        if self._waiting is not None:
            rows = np.concatenate([self._waiting, rows])
        time, command, response = rows[:, 0], rows[:, 1], rows[:, 2]
        spikes = see_spikes(time, command, response, self._unit)
        mended = np.where(spikes.mask, np.nan, response)
        flat = see_declared_clipping(time, mended, *self._range, self._unit)
        if len(rows) > 4 * BESIDE:
            flat = flat or see_clipping(time, command, mended, self._unit)
            self._gathered += [*see_gaps(time, command), *spikes.seen, *flat]
            self._gathered += see_stuck(time, command, mended, self._unit)
        end = len(rows) if last else max(self._emitted, len(rows) - BESIDE)
        chosen = slice(self._emitted, end)
        keep = max(0, end - BESIDE)
        self._waiting, self._emitted = rows[keep:], end - keep
        self._samples += end - chosen.start
        self._lost += int(np.count_nonzero(~np.isfinite(mended[chosen])))
        return Part(time[chosen], rows[chosen, 3:], mended[chosen])

    @property
    def seen(self) -> tuple[Seen, ...]:
        """Everything of all parts, in their order."""
        return (*self._loss(), *self._gathered)

    def _loss(self) -> tuple[Seen, ...]:
        if not self._lost:
            return ()
        share = self._lost / self._samples
        size = f"{self._lost} samples ({100 * share:.3g} %)"
        if share <= MUCH_LOST:
            return (Seen("lost samples", "whole record", size, "left out"),)
        refuses: Refuses = "stops" if share > TOO_MUCH_LOST else "holds"
        return (Seen("lost samples", "whole record", size, "repeat the run: too much of it is lost", refuses),)
