"""Margins of the exact sampled loop on the true rig's linear part, from the definitions.

The chain is discretised with its hold and fractional delay: with total delay m T + d, 0 <= d < T,
x[k+1] = F x[k] + G0 u[k-m] + G1 u[k-m-1] with F = exp(A T), G0 = int_0^(T-d) exp(A s) ds B and
G1 = exp(A (T-d)) int_0^d exp(A s) ds B.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import expm
from true_rig import TrueRig
from true_rig.controller import Equation
from true_rig.linear_stages import Lag, StateSpace

ComplexArray = NDArray[np.complex128]
FloatArray = NDArray[np.float64]


@dataclass(frozen=True)
class Margins:
    """Least over all crossings: dB, deg, and the largest |1/(1 + L)|."""

    gain: float
    phase: float
    sensitivity: float


def chain(rig: TrueRig) -> StateSpace:
    """The rig's stages and its sensor's lag in series, without the dead time."""
    parts = [stage.linear() for stage in rig.stages]
    parts += [Lag(rig.sensor.lag).linear()] if rig.sensor.lag > 0.0 else []
    a, b, c, d = parts[0]
    for a2, b2, c2, d2 in parts[1:]:
        n, m = len(b), len(b2)
        joined = np.zeros((n + m, n + m))
        joined[:n, :n], joined[n:, n:], joined[n:, :n] = a, a2, np.outer(b2, c)
        a, b, c, d = joined, np.concatenate([b, b2 * d]), np.concatenate([d2 * c, c2]), d2 * d
    return a, b, c, d


def integral(a: FloatArray, b: FloatArray, t: float) -> tuple[FloatArray, FloatArray]:
    """exp(A t) and the integral of exp(A s) B from 0 to t."""
    n = len(b)
    block = np.zeros((n + 1, n + 1))
    block[:n, :n], block[:n, n] = a * t, b * t
    both = expm(block)
    return both[:n, :n], both[:n, n]


def sampled_plant(rig: TrueRig, interval: float, delay: float, frequency: FloatArray) -> ComplexArray:
    """Response of hold, delay and rig from sample to sample at (m,) frequencies in rad/s."""
    a, b, c, d = chain(rig)
    whole = int(np.floor((rig.dead_time + delay) / interval + 1e-9))
    part = max(rig.dead_time + delay - whole * interval, 0.0)
    step, _ = integral(a, b, interval)
    late, first = integral(a, b, interval - part)
    _, rest = integral(a, b, part)
    second = late @ rest
    z = np.exp(1j * frequency * interval)
    driven = first[None, :] + second[None, :] / z[:, None]
    x = np.linalg.solve(z[:, None, None] * np.eye(len(b)) - step, driven[:, :, None])[:, :, 0]
    return np.asarray((x @ c + d / (z if part > 0.0 else 1.0)) / z**whole, dtype=np.complex128)


def frequencies(rig: TrueRig, interval: float, slowest: float) -> FloatArray:
    """Log-spaced up to half the sample rate, denser about the poles of the rig."""
    top = np.pi / interval
    grids = [np.geomspace(min(slowest, top / 100.0), top, 600)]
    for pole in np.linalg.eigvals(chain(rig)[0]):
        if abs(pole.imag) > 0.0 and pole.imag < top:
            width = max(abs(pole.real), 1e-3 * pole.imag)
            grids.append(pole.imag + width * np.linspace(-12.0, 12.0, 241))
    every = np.unique(np.concatenate(grids))
    return every[(every > 0.0) & (every <= top)]


def controller_response(law: Equation, frequency: FloatArray) -> ComplexArray:
    """From response to command, sign of the feedback taken out."""
    back = np.exp(-1j * frequency * law.interval)
    top = sum(c * back**i for i, c in enumerate(law.response))
    return np.asarray(top / sum(c * back**i for i, c in enumerate(law.command)), dtype=np.complex128)


def margins(loop: ComplexArray) -> Margins:
    """Margins of a loop given on a fine grid, straight between points."""
    sensitivity = float(np.max(1.0 / np.abs(1.0 + loop)))
    size, left = np.log(np.abs(loop)), loop.real < 0.0
    cross = np.flatnonzero((np.sign(loop.imag[:-1]) != np.sign(loop.imag[1:])) & left[:-1] & left[1:])
    gain = float("inf")
    for k in cross:
        part = loop.imag[k] / (loop.imag[k] - loop.imag[k + 1])
        gain = min(gain, abs(size[k] + part * (size[k + 1] - size[k])) * 20.0 / np.log(10.0))
    if left[-1]:  # at half the sample rate the loop is real: a crossing of its own
        gain = min(gain, abs(float(size[-1])) * 20.0 / np.log(10.0))
    phase = float("inf")
    for k in np.flatnonzero(np.sign(size[:-1]) != np.sign(size[1:])):
        part = size[k] / (size[k] - size[k + 1])
        there = np.angle(-loop[k]) + part * np.angle(loop[k + 1] / loop[k])
        phase = min(phase, abs(np.degrees(np.angle(np.exp(1j * there)))))
    return Margins(gain, phase, sensitivity)
