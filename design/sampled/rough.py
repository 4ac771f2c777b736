"""The sampled law around drives with dry friction."""

import numpy as np

from ...ident.run import FloatArray
from ..discretise import LawColumns
from .drives import Drives
from .loop import Clamps, History


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
        self.any_old = np.any(self.old_share > 0.0, axis=1)
        self.any_new = np.any(self.old_share < self.stride, axis=1)
        self.old_decay = drives.decay(self.old_share)
        self.new_share = self.stride - self.old_share
        self.new_decay = drives.decay(self.new_share)
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
                after = place
                if self.any_old[j]:
                    speed, moved = self.drives.advance(speed, old, self.old_share[j], self.old_decay[j])
                    after = after + moved
                if self.any_new[j]:
                    speed, moved = self.drives.advance(speed, new, self.new_share[j], self.new_decay[j])
                    after = after + moved
                seen, place = self._seen(seen, place, after)
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
