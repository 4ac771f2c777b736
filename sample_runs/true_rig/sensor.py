"""The sensor: its own lag, coloured and white noise, the steps of its converter, and its range."""

from dataclasses import dataclass
from math import exp, sqrt

import numpy as np


@dataclass(frozen=True)
class Sensor:
    """What stands between the true response and the logged one.

    Attributes
    ----------
    lag : float, s
    noise : float, response unit
        Standard deviation of the noise.
    noise_time : float, s
        Correlation time of the noise; 0 is white.
    step : float, response unit
        Of the converter; 0 is none.
    lowest, highest : float, response unit
    """

    lag: float = 0.0
    noise: float = 0.0
    noise_time: float = 0.0
    step: float = 0.0
    lowest: float = -float("inf")
    highest: float = float("inf")

    def quiet(self) -> "Sensor":
        """The same without noise and converter steps."""
        return Sensor(lag=self.lag, lowest=self.lowest, highest=self.highest)


class Reading:
    """A sensor in use: an AR(1) noise with its memory, sampled at whatever moments it is asked."""

    def __init__(self, sensor: Sensor, generator: np.random.Generator) -> None:
        self.sensor = sensor
        self._draw = iter(())
        self._generator = generator
        self._t: float | None = None
        self._noise = 0.0

    def _white(self) -> float:
        value = next(self._draw, None)
        if value is None:
            self._draw = iter(self._generator.standard_normal(1024).tolist())
            value = next(self._draw)
        return float(value)

    def at(self, t: float, y: float) -> float:
        """The reading of the lagged response y at time t."""
        sensor = self.sensor
        if sensor.noise > 0.0:
            gap = 0.0 if self._t is None else t - self._t
            keep = exp(-gap / sensor.noise_time) if sensor.noise_time > 0.0 and self._t is not None else 0.0
            self._noise = keep * self._noise + sensor.noise * sqrt(1.0 - keep * keep) * self._white()
            self._t = t
            y += self._noise
        if sensor.step > 0.0:
            y = sensor.step * round(y / sensor.step)
        return min(max(y, sensor.lowest), sensor.highest)
