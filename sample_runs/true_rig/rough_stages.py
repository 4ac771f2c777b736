"""Stages that no linear model has: saturation, rate limit, friction with stick, play, valve stiction, disturbances.

The interface is that of linear_stages.
"""

from collections.abc import Callable
from math import exp, sin

import numpy as np

from .linear_stages import Lag, StateSpace, direct


class Actuator:
    """Clips the command to its range, follows it with a lag, and no faster than `rate` per second.

    It is the first stage, so that its input is constant over a step.
    """

    def __init__(self, lowest: float, highest: float, lag: float = 0.0, rate: float = float("inf")) -> None:
        self.lowest, self.highest, self.lag, self.rate = lowest, highest, lag, rate
        self.x = 0.0

    def advance(self, u0: float, u1: float, h: float) -> tuple[float, float]:
        target = min(max(u1, self.lowest), self.highest)
        if self.lag == 0.0 and self.rate == float("inf"):
            self.x = target
            return target, target
        before, gap = self.x, target - self.x
        threshold = self.rate * self.lag
        if abs(gap) > threshold:
            ramp = min((abs(gap) - threshold) / self.rate, h)
            self.x += self.rate * ramp if gap > 0.0 else -self.rate * ramp
            h -= ramp
        if h > 0.0 and self.lag > 0.0:
            self.x = target + (self.x - target) * exp(-h / self.lag)
        return before, self.x

    def rest(self, u: float) -> float:
        self.x = min(max(u, self.lowest), self.highest)
        return self.x

    def linear(self) -> StateSpace:
        return Lag(self.lag).linear() if self.lag > 0.0 else direct(1.0)


class FrictionDrive:
    """T v' + v = w - coulomb sign(v): a drive with viscous and Coulomb friction, in units of speed.

    At rest it sticks until the wanted speed w passes `breakaway`, which is at least `coulomb`.
    """

    def __init__(self, time: float, coulomb: float, breakaway: float | None = None) -> None:
        self.time, self.coulomb = time, coulomb
        self.breakaway = coulomb if breakaway is None else breakaway
        self.v = 0.0

    def _slide(self, v: float, u0: float, slope: float, t: float, sign: float) -> float:
        """Speed after t of sliding in the direction `sign` under a straight input."""
        start, bias = u0 - sign * self.coulomb, slope * self.time
        return start + slope * t - bias + (v - start + bias) * exp(-t / self.time)

    def _stop(self, v: float, u0: float, slope: float, h: float, sign: float) -> float:
        """Time at which a slide that changes sign within h stops, by bisection and a last secant."""
        low, high = 0.0, h
        for _ in range(20):
            middle = 0.5 * (low + high)
            low, high = (middle, high) if self._slide(v, u0, slope, middle, sign) * sign > 0.0 else (low, middle)
        return 0.5 * (low + high)

    def advance(self, u0: float, u1: float, h: float) -> tuple[float, float]:
        before, slope, now = self.v, (u1 - u0) / h, 0.0
        for _ in range(4):
            left = h - now
            if left <= 0.0:
                break
            u = u0 + slope * now
            if self.v == 0.0:
                loose = self._loose(u, slope, left)
                if loose is None:
                    break
                now += loose
                u, left = u0 + slope * now, h - now
                sign = 1.0 if u > 0.0 else -1.0
            else:
                sign = 1.0 if self.v > 0.0 else -1.0
            after = self._slide(self.v, u, slope, left, sign)
            if self.v == 0.0 or after * sign > 0.0:
                self.v = after if after * sign > 0.0 else 0.0
                break
            now += self._stop(self.v, u, slope, left, sign)
            self.v = 0.0
        return before, self.v

    def _loose(self, u: float, slope: float, left: float) -> float | None:
        """Time until the input breaks the drive loose; None when it stays stuck."""
        if abs(u) > self.breakaway:
            return 0.0
        if abs(u + slope * left) <= self.breakaway or slope == 0.0:
            return None
        return (self.breakaway * (1.0 if slope > 0.0 else -1.0) - u) / slope

    def rest(self, u: float) -> float:
        self.v = 0.0 if abs(u) <= self.breakaway else u - self.coulomb * (1.0 if u > 0.0 else -1.0)
        return self.v

    def linear(self) -> StateSpace:
        return Lag(self.time).linear()


class Backlash:
    """Play of the given width between input and output."""

    def __init__(self, width: float) -> None:
        self.half, self.y = 0.5 * width, 0.0

    def _follow(self, u: float) -> float:
        self.y = min(max(self.y, u - self.half), u + self.half)
        return self.y

    def advance(self, u0: float, u1: float, h: float) -> tuple[float, float]:
        return self._follow(u0), self._follow(u1)

    def rest(self, u: float) -> float:
        self.y = u
        return u

    def linear(self) -> StateSpace:
        return direct(1.0)


class StickingValve:
    """The stem stays where it is until the command is `stick` away, then jumps to `slide` short of the command."""

    def __init__(self, stick: float, slide: float) -> None:
        self.stick, self.slide, self.y = stick, slide, 0.0

    def _follow(self, u: float) -> float:
        gap = u - self.y
        if abs(gap) > self.stick:
            self.y = u - self.slide if gap > 0.0 else u + self.slide
        return self.y

    def advance(self, u0: float, u1: float, h: float) -> tuple[float, float]:
        return self._follow(u0), self._follow(u1)

    def rest(self, u: float) -> float:
        self.y = u
        return u

    def linear(self) -> StateSpace:
        return direct(1.0)


class Disturbed:
    """Adds a disturbance, a function of the time since the run began."""

    def __init__(self, added: Callable[[float], float]) -> None:
        self.added, self.t = added, 0.0

    def advance(self, u0: float, u1: float, h: float) -> tuple[float, float]:
        before = self.added(self.t)
        self.t += h
        return u0 + before, u1 + self.added(self.t)

    def rest(self, u: float) -> float:
        return u + self.added(0.0)

    def linear(self) -> StateSpace:
        return direct(1.0)


def waves(
    generator: np.random.Generator, amplitude: float, periods: tuple[float, ...], from_zero: bool = True
) -> Callable[[float], float]:
    """A seeded sum of slow sines of about the given periods (s) and the given rms amplitude.

    `from_zero` shifts it to start at zero; without it the mean is zero, as an integrating rig needs.
    """
    rates = 2.0 * np.pi / (np.asarray(periods) * generator.uniform(0.85, 1.15, len(periods)))
    phases = generator.uniform(0.0, 2.0 * np.pi, len(periods))
    each = amplitude * np.sqrt(2.0 / len(periods))
    terms = list(zip(rates.tolist(), phases.tolist(), strict=True))
    shift = sum(sin(phase) for _, phase in terms) if from_zero else 0.0

    def value(t: float) -> float:
        return float(each * (sum(sin(rate * t + phase) for rate, phase in terms) - shift))

    return value
