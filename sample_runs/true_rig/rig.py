"""A true rig: dead time, a chain of stages, a sensor; run open loop under a command profile or in closed loop."""

from collections import deque
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from math import ceil

import numpy as np
from numpy.typing import NDArray

from .controller import SheetController
from .linear_stages import Lag, Stage, fresh
from .sensor import Reading, Sensor

FloatArray = NDArray[np.float64]


@dataclass(frozen=True)
class TrueRig:
    """An invented rig.

    Attributes
    ----------
    stages : tuple of Stage
        From the command, as it arrives after the dead time, to the deviation of the response.
    dead_time : float, s
    command_rest, response_rest : float
        The command that keeps the rig still, and the response there.
    sensor : Sensor
    longest_step : float, s
        The longest step taken; short against the fastest stage.
    """

    stages: tuple[Stage, ...]
    dead_time: float
    command_rest: float
    response_rest: float
    sensor: Sensor
    longest_step: float


@dataclass(frozen=True, eq=False)
class Log:
    """What came out of a run.

    Attributes
    ----------
    time, command, reading : (n,) arrays
        At the logger's or the controller's samples.
    fine_time, fine_response : (m,) arrays
        The true response, before the sensor, at every step.
    """

    time: FloatArray
    command: FloatArray
    reading: FloatArray
    fine_time: FloatArray
    fine_response: FloatArray


class Motion:
    """A rig in motion, from rest.

    Steps end wherever a command arrives, so a held command acts at its exact time however the dead time falls.
    """

    def __init__(self, rig: TrueRig, command: float | None = None) -> None:
        self.rig = rig
        self.t = 0.0
        self.u = rig.command_rest if command is None else command
        self._stages = fresh(rig.stages)
        self._lag = Lag(rig.sensor.lag) if rig.sensor.lag > 0.0 else None
        self._waiting: deque[tuple[float, float]] = deque()
        value = self.u
        for stage in self._stages:
            value = stage.rest(value)
        self._y = value
        self._sensed = self._lag.rest(value) if self._lag else value
        self.fine_time, self.fine_response = [0.0], [value + rig.response_rest]

    @property
    def response(self) -> float:
        """True response, absolute."""
        return self._y + self.rig.response_rest

    @property
    def sensed(self) -> float:
        """Response behind the sensor's lag, absolute, without noise."""
        return self._sensed + self.rig.response_rest

    def send(self, t: float, command: float) -> None:
        """The command leaves for the rig at time t."""
        self._waiting.append((t + self.rig.dead_time, command))

    def advance(self, until: float) -> None:
        """Move on to the given time."""
        while True:
            stop = min(until, self._waiting[0][0]) if self._waiting else until
            if stop > self.t:
                self._walk(stop)
            if not self._waiting or self._waiting[0][0] > until:
                return
            self.u = self._waiting.popleft()[1]

    def _walk(self, stop: float) -> None:
        start, gap = self.t, stop - self.t
        count = max(1, ceil(gap / self.rig.longest_step - 1e-9))
        h, level = gap / count, self.rig.response_rest
        stages, lag, u = self._stages, self._lag, self.u
        y = self._y
        for i in range(1, count + 1):
            u0 = u1 = u
            for stage in stages:
                u0, u1 = stage.advance(u0, u1, h)
            y = u1
            if lag is not None:
                self._sensed = lag.advance(u0, u1, h)[1]
            self.fine_time.append(start + i * h)
            self.fine_response.append(y + level)
        self._y = y
        if lag is None:
            self._sensed = y
        self.t = stop


def open_loop(
    rig: TrueRig,
    profile: Sequence[tuple[float, float]],
    duration: float,
    interval: float,
    generator: np.random.Generator,
) -> Log:
    """Log a run under a command profile.

    Parameters
    ----------
    profile : sequence of (time in s, command)
        The command changes at each time and is held; before the first it is the rig's command at rest.
    duration, interval : float, s
        Of the record, and between its samples.
    """
    motion, reading = Motion(rig), Reading(rig.sensor, generator)
    count = round(duration / interval)
    time, command, readings = np.arange(count) * interval, np.empty(count), np.empty(count)
    changes, now = deque(profile), rig.command_rest
    for k in range(count):
        t = k * interval
        while changes and changes[0][0] <= t + 1e-9 * interval:
            now = changes.popleft()[1]
            motion.send(t, now)
        motion.advance(t)
        command[k], readings[k] = now, reading.at(t, motion.sensed)
    return Log(time, command, readings, np.array(motion.fine_time), np.array(motion.fine_response))


def closed_loop(
    rig: TrueRig,
    controller: SheetController,
    setpoint: Callable[[float], float],
    duration: float,
    generator: np.random.Generator | None = None,
    computation_delay: float = 0.0,
    added: Callable[[float], float] | None = None,
) -> Log:
    """Run a law on the rig, from rest, sampling with the sensor's noise, or without where no generator is given.

    Parameters
    ----------
    setpoint : callable
        Absolute setpoint at a controller sample, by its time in s.
    added : callable or None
        A disturbance of the command, by the time of the sample that sends it: added behind the clamp.
    """
    sensor = rig.sensor if generator is not None else rig.sensor.quiet()
    reading = Reading(sensor, np.random.default_rng(0) if generator is None else generator)
    motion, interval = Motion(rig), controller.equation.interval
    count = ceil(duration / interval) + 1
    time, command, readings = np.arange(count) * interval, np.empty(count), np.empty(count)
    for k in range(count):
        t = k * interval
        motion.advance(t)
        y = reading.at(t, motion.sensed)
        u = controller.update(setpoint(t), y)
        motion.send(t + computation_delay, u + (added(t) if added else 0.0))
        command[k], readings[k] = u, y
    return Log(time, command, readings, np.array(motion.fine_time), np.array(motion.fine_response))
