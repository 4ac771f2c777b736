"""Drives with dry friction, many at once: speed and place in closed form under a constant command."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ...ident.plant import Plant
from ...ident.run import FloatArray


@dataclass(frozen=True, eq=False)
class Drives:
    """c drives, T v' = u - friction sign(v) - v, response' = gain v, behind a delay.

    Attributes
    ----------
    gain : (c,) array, response unit per command unit and s
    lag : (c,) array, s
    friction : (c,) array, command unit
    delay : (c,) array, s
        Total, computation included.
    """

    gain: FloatArray
    lag: FloatArray
    friction: FloatArray
    delay: FloatArray

    def take(self, chosen: NDArray[np.int64]) -> "Drives":
        """The drives of some columns."""
        return Drives(self.gain[chosen], self.lag[chosen], self.friction[chosen], self.delay[chosen])

    def advance(self, speed: FloatArray, level: FloatArray, length: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Speed after `length` seconds under a constant command, and how far the response moved.

        A drive that comes to rest within the stretch stays or turns in what is left of it.
        """
        speed, moved, left = self._phase(speed, level, length)
        if np.any(left > 0.0):
            speed, more, _ = self._phase(speed, level, left)
            moved = moved + more
        return speed, moved

    def _phase(
        self, speed: FloatArray, level: FloatArray, length: FloatArray
    ) -> tuple[FloatArray, FloatArray, FloatArray]:
        way = np.where(speed != 0.0, np.sign(speed), np.sign(level))
        stuck = (speed == 0.0) & (np.abs(level) <= self.friction)
        final = np.where(stuck, 0.0, level - way * self.friction)
        stops = (speed != 0.0) & (final * way < 0.0)
        if not stops.any():
            decay = np.exp(-length / self.lag)
            moved = self.gain * (final * length + (speed - final) * self.lag * (1.0 - decay))
            return final + (speed - final) * decay, moved, np.zeros_like(length)
        until = np.where(stops, self.lag * np.log1p(np.where(stops, -speed / np.where(stops, final, 1.0), 0.0)), np.inf)
        step = np.minimum(length, until)
        decay = np.exp(-step / self.lag)
        moved = self.gain * (final * step + (speed - final) * self.lag * (1.0 - decay))
        after = np.where(until <= length, 0.0, final + (speed - final) * decay)
        return after, moved, length - step


def drives_of(plants: Sequence[Plant], friction: FloatArray, delay: FloatArray) -> Drives | None:
    """The drives among the plants; None where friction holds none of them.

    Only K/(s (T s + 1)) can be run with its friction; any other plant gets none here.

    Parameters
    ----------
    friction : (p,) array, command unit
    delay : (p,) array, s
        Total.
    """
    gain, lag, held = np.ones(len(plants)), np.ones(len(plants)), np.zeros(len(plants))
    for i, plant in enumerate(plants):
        bottom = plant.denominator
        if friction[i] > 0.0 and len(bottom) == 3 and bottom[2] == 0.0 and len(plant.numerator) == 1:
            gain[i], lag[i], held[i] = plant.static_gain, bottom[0] / bottom[1], friction[i]
    return Drives(gain, lag, held, delay) if np.any(held > 0.0) else None
