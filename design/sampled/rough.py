"""The sampled law around drives with dry friction."""

import numpy as np

from ...ident.run import FloatArray
from ..discretise import LawColumns
from .bank import IndexArray
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
    """The working arrays.

    Within a sample the command that reaches a drive changes once, `part` seconds in. Drives that neither stop nor start
    in that sample are walked over all sub-points at once, and only the others are followed through their stops.
    """

    def __init__(
        self, drives: Drives, law: LawColumns, interval: float, points: int, filter_time: float, clamps: Clamps
    ) -> None:
        self.drives, self.law, self.clamps, self.points = drives, law, clamps, points
        self.stride = interval / points
        whole = np.floor(drives.delay / interval + 1e-9)
        self.lag = whole.astype(np.int64)
        self.part = np.maximum(drives.delay - whole * interval, 0.0)
        self.split = bool(np.any(self.part > 0.0))
        times = self.stride * np.arange(1, points + 1)[:, None]
        self.on_old = times <= self.part
        self.times_old, self.times_new = np.minimum(times, self.part), np.maximum(times - self.part, 0.0)
        length = np.where(self.on_old, self.times_old, self.times_new)
        self.decay, self.drift, self.swing = _walk(drives, length)
        self.part_decay, self.part_drift, self.part_swing = _walk(drives, self.part)
        self.smooth = np.exp(-self.stride / filter_time) if filter_time > 0.0 else 0.0
        self.weights = _ramp_weights(self.smooth, points) if self.smooth else np.zeros(points + 1)
        count = drives.gain.size
        self.speed, self.place = np.zeros(count), np.zeros(count)
        self._turn(np.zeros(count))

    def run(self, setpoint: FloatArray, disturbance: FloatArray, samples: int) -> History:
        count = setpoint.size
        depth = int(self.lag.max(initial=0)) + 1
        sent = np.zeros((samples + depth, count))
        columns = np.arange(count)
        response, command = np.empty((samples, self.points, count)), np.empty((samples, count))
        limited = np.zeros((samples, count), dtype=bool)
        law, goal = self.law, self.law.setpoint * setpoint
        ahead = law.memory[1:] - law.command[1:]
        first = second = before = seen = np.zeros(count)
        fastest = np.zeros((self.points, count))
        for k in range(samples):
            wanted = first + goal[0] - law.response[0] * seen
            low = np.maximum(self.clamps.lowest, before - self.clamps.change)
            high = np.minimum(self.clamps.highest, before + self.clamps.change)
            given = np.minimum(np.maximum(wanted, low), high)
            np.not_equal(given, wanted, out=limited[k])
            command[k], before = given, given
            np.add(given, disturbance, out=sent[k + depth])
            first = second + goal[1] - law.response[1] * seen + ahead[0] * given - law.memory[1] * wanted
            second = goal[2] - law.response[2] * seen + ahead[1] * given - law.memory[2] * wanted
            new, old = sent[k + depth - self.lag, columns], sent[k + depth - self.lag - 1, columns]
            begun = self.place
            speeds, response[k] = self._sample(old, new)
            np.maximum(fastest, np.abs(speeds), out=fastest)
            seen = self._seen(seen, begun, response[k]) if self.smooth else self.place
        flat = response.reshape(samples * self.points, count)
        return History(flat, command, limited, fastest.max(axis=0) * np.abs(self.drives.gain))

    def _turn(self, speed: FloatArray) -> None:
        """Note which way each drive goes."""
        self.way = np.sign(speed)
        self.moving = np.abs(self.way)
        self.still = self.way == 0.0
        self.any_still = bool(self.still.any())
        self.brake = self.way * self.drives.friction

    def _sample(self, old: FloatArray, new: FloatArray) -> tuple[FloatArray, FloatArray]:
        """(m, c) speeds and places at the sub-points, as if no drive stopped or started; those that do, once more."""
        final, begin, ahead = self.moving * new - self.brake, self.speed, self.place
        if self.split:
            final_old = self.moving * old - self.brake
            excess = begin - final_old
            middle = final_old + excess * self.part_decay
            through = self.place + final_old * self.part_drift + excess * self.part_swing
            begin = np.where(self.on_old, begin, middle)
            ahead = np.where(self.on_old, ahead, through)
            final = np.where(self.on_old, final_old, final)
        excess = begin - final
        speeds = final + excess * self.decay
        places = ahead + final * self.drift + excess * self.swing
        kept = speeds[-1] * self.way > 0.0
        if self.split:
            kept &= middle * self.way > 0.0
        if self.any_still:
            rest = np.abs(new) <= self.drives.friction
            if self.split:
                rest &= (self.part == 0.0) | (np.abs(old) <= self.drives.friction)
            kept |= self.still & rest
        if kept.all():
            self.speed, self.place = speeds[-1], places[-1]
            return speeds, places
        chosen = np.flatnonzero(~kept)
        speeds[:, chosen], places[:, chosen] = self._followed(chosen, old[chosen], new[chosen])
        self.speed, self.place = speeds[-1], places[-1]
        self._turn(self.speed)
        return speeds, places

    def _followed(self, chosen: IndexArray, old: FloatArray, new: FloatArray) -> tuple[FloatArray, FloatArray]:
        """The same of a few drives, with their stops, rests and starts."""
        drives, on_old = self.drives.take(chosen), self.on_old[:, chosen]
        part = self.part[chosen]
        speeds, places = drives.walked(self.speed[chosen], old, np.vstack([self.times_old[:, chosen], part]))
        later, moved = drives.walked(speeds[-1], new, self.times_new[:, chosen])
        return np.where(on_old, speeds[:-1], later), self.place[chosen] + places[:-1] + moved

    def _seen(self, seen: FloatArray, begun: FloatArray, places: FloatArray) -> FloatArray:
        """What the controller sees at the end of a sample, the response taken as straight within a sub-step."""
        return np.asarray(seen * self.smooth**self.points + begun * self.weights[0] + self.weights[1:] @ places)


def _walk(drives: Drives, length: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
    """What `length` seconds leave of a speed, and how far a final speed and an excess over it carry the response."""
    decay = drives.decay(length)
    return decay, drives.gain * length, drives.gain * drives.lag * (1.0 - decay)


def _ramp_weights(smooth: float, points: int) -> FloatArray:
    """(m + 1,) what the places at a sample's beginning and sub-points add to a filtered response, ramps between them.

    `smooth` is what a sub-step leaves of the filter's state.
    """
    rate = -float(np.log(smooth))
    before, after = (1.0 - smooth) / rate - smooth, 1.0 - (1.0 - smooth) / rate
    left = smooth ** np.arange(points - 1.0, -1.0, -1.0)
    return np.asarray(np.append(before * left, 0.0) + np.append(0.0, after * left))
