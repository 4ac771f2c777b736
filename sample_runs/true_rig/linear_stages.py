"""Linear stages: each answers an input that runs straight over a small step, exactly.

Every stage has the same three methods:

* ``advance(u0, u1, h)``: the input runs straight from u0 to u1 over h seconds; returns the output at both ends. At the
  start of a step the input may have jumped, which is why the first end is returned too.
* ``rest(u)``: put the stage at rest under the constant input u; returns its output.
* ``linear()``: (A, B, C, D) of the stage about its working point, for frequency responses.
"""

from copy import copy
from math import cos, exp, sin, sqrt
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

StateSpace = tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64], float]


class Stage(Protocol):
    """What a true rig is a chain of."""

    def advance(self, u0: float, u1: float, h: float) -> tuple[float, float]:
        """Output at both ends of a step of h seconds."""

    def rest(self, u: float) -> float:
        """Output at rest under a constant input."""

    def linear(self) -> StateSpace:
        """(A, B, C, D) about the working point."""


def fresh(stages: tuple[Stage, ...]) -> list[Stage]:
    """Copies with a state of their own."""
    return [copy(stage) for stage in stages]


def direct(gain: float) -> StateSpace:
    """A stage without memory."""
    return np.zeros((0, 0)), np.zeros(0), np.zeros(0), gain


class Gain:
    """y = gain (u - balance)(1 + bend (u - balance)); a small bend makes the gain depend on the working point."""

    def __init__(self, gain: float, balance: float = 0.0, bend: float = 0.0) -> None:
        self.gain, self.balance, self.bend = gain, balance, bend

    def _value(self, u: float) -> float:
        d = u - self.balance
        return self.gain * d * (1.0 + self.bend * d)

    def advance(self, u0: float, u1: float, h: float) -> tuple[float, float]:
        return self._value(u0), self._value(u1)

    def rest(self, u: float) -> float:
        return self._value(u)

    def linear(self) -> StateSpace:
        return direct(self.gain)


class Lag:
    """T y' + y = u. Exact for u = u0 + s t: y = u1 - sT + (y0 - u0 + sT) exp(-h/T)."""

    def __init__(self, time: float) -> None:
        self.time, self.x, self._h, self._decay = time, 0.0, -1.0, 1.0

    def advance(self, u0: float, u1: float, h: float) -> tuple[float, float]:
        if h != self._h:
            self._h, self._decay = h, exp(-h / self.time)
        before = self.x
        bias = (u1 - u0) / h * self.time
        self.x = u1 - bias + (before - u0 + bias) * self._decay
        return before, self.x

    def rest(self, u: float) -> float:
        self.x = u
        return u

    def linear(self) -> StateSpace:
        one = np.ones(1)
        return -np.ones((1, 1)) / self.time, one / self.time, one, 0.0


class Integrator:
    """y' = gain u. Exact for a straight input (trapezoid)."""

    def __init__(self, gain: float = 1.0) -> None:
        self.gain, self.x = gain, 0.0

    def advance(self, u0: float, u1: float, h: float) -> tuple[float, float]:
        before = self.x
        self.x = before + self.gain * 0.5 * h * (u0 + u1)
        return before, self.x

    def rest(self, u: float) -> float:
        return self.x

    def linear(self) -> StateSpace:
        return np.zeros((1, 1)), np.array([self.gain]), np.ones(1), 0.0


class Resonance:
    """y'' + 2 d w y' + w^2 y = w^2 u with damping ratio d < 1. Exact for a straight input.

    With u = u0 + s t the particular answer is u - 2 d s / w; the rest is a decaying rotation.
    """

    def __init__(self, frequency: float, damping: float) -> None:
        self.frequency, self.damping = frequency, damping
        self.x, self.speed, self._h = 0.0, 0.0, -1.0
        self._rotation = (1.0, 0.0, 0.0, 1.0)

    def _set_step(self, h: float) -> None:
        w, d = self.frequency, self.damping
        damped = w * sqrt(1.0 - d * d)
        decay, c, s = exp(-d * w * h), cos(damped * h), sin(damped * h)
        ratio = d * w / damped
        self._h = h
        self._rotation = (
            decay * (c + ratio * s),
            decay * s / damped,
            -decay * w * w * s / damped,
            decay * (c - ratio * s),
        )

    def advance(self, u0: float, u1: float, h: float) -> tuple[float, float]:
        if h != self._h:
            self._set_step(h)
        before = self.x
        slope = (u1 - u0) / h
        bias = 2.0 * self.damping * slope / self.frequency
        offset, speed = before - u0 + bias, self.speed - slope
        a, b, c, d = self._rotation
        self.x = u1 - bias + a * offset + b * speed
        self.speed = slope + c * offset + d * speed
        return before, self.x

    def rest(self, u: float) -> float:
        self.x, self.speed = u, 0.0
        return u

    def linear(self) -> StateSpace:
        w, d = self.frequency, self.damping
        a = np.array([[0.0, 1.0], [-w * w, -2.0 * d * w]])
        return a, np.array([0.0, w * w]), np.array([1.0, 0.0]), 0.0


class SlowShare:
    """(1 - share) u + share * lag(u): a fast part and a slow part in parallel, such as air and wall of an oven."""

    def __init__(self, share: float, time: float) -> None:
        self.share, self.slow = share, Lag(time)

    def __copy__(self) -> "SlowShare":
        return SlowShare(self.share, self.slow.time)

    def advance(self, u0: float, u1: float, h: float) -> tuple[float, float]:
        s0, s1 = self.slow.advance(u0, u1, h)
        quick = 1.0 - self.share
        return quick * u0 + self.share * s0, quick * u1 + self.share * s1

    def rest(self, u: float) -> float:
        return (1.0 - self.share) * u + self.share * self.slow.rest(u)

    def linear(self) -> StateSpace:
        a, b, c, _ = self.slow.linear()
        return a, b, self.share * c, 1.0 - self.share


class Pair:
    """Two chains side by side on the same input, summed with weights: two resonances of one structure."""

    def __init__(self, first: Stage, second: Stage, weight: float) -> None:
        self.first, self.second, self.weight = first, second, weight

    def __copy__(self) -> "Pair":
        return Pair(copy(self.first), copy(self.second), self.weight)

    def advance(self, u0: float, u1: float, h: float) -> tuple[float, float]:
        a0, a1 = self.first.advance(u0, u1, h)
        b0, b1 = self.second.advance(u0, u1, h)
        w = self.weight
        return (1.0 - w) * a0 + w * b0, (1.0 - w) * a1 + w * b1

    def rest(self, u: float) -> float:
        return (1.0 - self.weight) * self.first.rest(u) + self.weight * self.second.rest(u)

    def linear(self) -> StateSpace:
        a1, b1, c1, d1 = self.first.linear()
        a2, b2, c2, d2 = self.second.linear()
        n, m, w = len(b1), len(b2), self.weight
        a = np.zeros((n + m, n + m))
        a[:n, :n], a[n:, n:] = a1, a2
        return a, np.concatenate([b1, b2]), np.concatenate([(1 - w) * c1, w * c2]), (1 - w) * d1 + w * d2
