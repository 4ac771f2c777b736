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

    def decay(self, length: FloatArray) -> FloatArray:
        """What `length` seconds leave of a speed that nothing drives, a share."""
        return np.asarray(np.exp(-length / self.lag))

    def walked(self, speed: FloatArray, level: FloatArray, times: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Speeds, and how far the response moved, after `times`, (c,) or (n, c), s, under a constant command.

        The level does not change, so that a drive comes to rest once at most; it stays or turns from there.
        """
        moving = speed != 0.0
        way = np.sign(np.where(moving, speed, level))
        beyond = np.abs(level) > self.friction
        final = np.where(moving | beyond, level - way * self.friction, 0.0)
        stops = moving & (final * way < 0.0)
        if not stops.any():
            return self._walked(speed, final, times, self.decay(times))
        until = np.where(stops, self.lag * np.log1p(np.where(stops, -speed / np.where(stops, final, 1.0), 0.0)), np.inf)
        first = np.minimum(times, until)
        after, moved = self._walked(speed, final, first, self.decay(first))
        rest = times - first
        turned = np.where(beyond, level - np.sign(level) * self.friction, 0.0)
        later, more = self._walked(np.zeros_like(speed), turned, rest, self.decay(rest))
        return np.where(times >= until, later, after), moved + more

    def _walked(
        self, speed: FloatArray, final: FloatArray, length: FloatArray, decay: FloatArray
    ) -> tuple[FloatArray, FloatArray]:
        moved = self.gain * (final * length + (speed - final) * self.lag * (1.0 - decay))
        return final + (speed - final) * decay, moved


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
