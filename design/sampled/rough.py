"""The sampled law around drives with dry friction: speed and place in closed form from one change to the next."""

from dataclasses import dataclass

import numpy as np

from ...ident.run import FloatArray
from ..discretise import LawColumns
from .loop import Clamps, History


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
        until = np.where(stops, self.lag * np.log1p(-speed / np.where(stops, final, -1.0)), np.inf)
        step = np.minimum(length, until)
        decay = np.exp(-step / self.lag)
        moved = self.gain * (final * step + (speed - final) * self.lag * (1.0 - decay))
        after = np.where(until <= length, 0.0, final + (speed - final) * decay)
        return after, moved, length - step


def simulate_rough(
    drives: Drives,
    law: LawColumns,
    *,
    interval: float,
    points: int,
    filter_time: float,
    setpoint: FloatArray,
    disturbance: FloatArray,
    clamps: Clamps,
    samples: int,
) -> History:
    """Response to a setpoint step and a command disturbance at the first sample, from rest.

    Parameters
    ----------
    interval : float, s
        T, of the law.
    points : int
        Sub-points a sample at which the response is kept.
    filter_time : float, s
        Of the filter that the controller sees the response through; 0 without.
    setpoint, disturbance : (c,) arrays
    clamps : Clamps
    samples : int

    Returns
    -------
    History
        Its rate is the largest speed of the response.
    """
    return _Rough(drives, law, interval, points, filter_time, clamps).run(setpoint, disturbance, samples)


class _Rough:
    def __init__(
        self, drives: Drives, law: LawColumns, interval: float, points: int, filter_time: float, clamps: Clamps
    ) -> None:
        self.drives, self.law, self.clamps, self.points = drives, law, clamps, points
        self.stride = interval / points
        whole = np.floor(drives.delay / interval + 1e-9)
        self.lag = whole.astype(np.int64)
        part = np.maximum(drives.delay - whole * interval, 0.0)
        begins = self.stride * np.arange(points)[:, None]
        self.old_share = np.clip(part[None, :] - begins, 0.0, self.stride)
        self.smooth = np.exp(-self.stride / filter_time) if filter_time > 0.0 else 0.0

    def run(self, setpoint: FloatArray, disturbance: FloatArray, samples: int) -> History:
        count = setpoint.size
        depth = int(self.lag.max(initial=0)) + 1
        sent = np.zeros((samples + depth, count))
        columns = np.arange(count)
        response, command = np.empty((samples, self.points, count)), np.empty((samples, count))
        limited = np.zeros((samples, count), dtype=bool)
        law, goal = self.law, self.law.setpoint * setpoint
        ahead = law.memory[1:] - law.command[1:]
        first = second = before = speed = place = seen = np.zeros(count)
        fastest = np.zeros(count)
        for k in range(samples):
            wanted = first + goal[0] - law.response[0] * seen
            low = np.maximum(self.clamps.lowest, before - self.clamps.change)
            high = np.minimum(self.clamps.highest, before + self.clamps.change)
            given = np.minimum(np.maximum(wanted, low), high)
            limited[k] = given != wanted
            command[k], before = given, given
            sent[k + depth] = given + disturbance
            first = second + goal[1] - law.response[1] * seen + ahead[0] * given - law.memory[1] * wanted
            second = goal[2] - law.response[2] * seen + ahead[1] * given - law.memory[2] * wanted
            new, old = sent[k + depth - self.lag, columns], sent[k + depth - self.lag - 1, columns]
            for j in range(self.points):
                share = self.old_share[j]
                speed, moved = self.drives.advance(speed, old, share)
                speed, more = self.drives.advance(speed, new, self.stride - share)
                seen, place = self._seen(seen, place, place + moved + more)
                response[k, j] = place
                np.maximum(fastest, np.abs(speed), out=fastest)
        flat = response.reshape(samples * self.points, count)
        return History(flat, command, limited, fastest * np.abs(self.drives.gain))

    def _seen(self, seen: FloatArray, before: FloatArray, after: FloatArray) -> tuple[FloatArray, FloatArray]:
        """What the controller sees, the response taken as straight within a sub-step, and the response."""
        if self.smooth == 0.0:
            return after, after
        rate = -np.log(self.smooth)
        bend = (after - before) / rate
        return after - bend + (seen - before + bend) * self.smooth, after
