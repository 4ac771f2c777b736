"""An independent look at a sampled loop over many gains: small exact steps in time, eigenvalues, a dense sweep.

Nothing of the package's loop is used: the plant is stepped by a matrix exponential in sub-steps of the sample (dead
times are whole numbers of them), the law is written out from the gains, and margins come from a dense sweep of the
frequency response of the stepped plant.
"""

from dataclasses import dataclass

import numpy as np
from scipy.linalg import expm

SUB = 20  # sub-steps a sample


@dataclass(frozen=True)
class Case:
    """One loop: a strictly proper plant, its dead time in sub-steps, an interval, and the gains of a PI with P = 1.

    Attributes
    ----------
    numerator, denominator : highest power of s first
    late : int
        Dead time in sub-steps.
    interval : float, s
    reset : float, 1/s
        I/P; 0: P alone.
    sign : float
    """

    numerator: tuple[float, ...]
    denominator: tuple[float, ...]
    late: int
    interval: float
    reset: float
    sign: float = 1.0

    @property
    def matrices(self):
        """A, B, C of the plant in s."""
        bottom = np.array(self.denominator) / self.denominator[0]
        n = bottom.size - 1
        a = np.eye(n, k=1)
        a[-1] = -bottom[:0:-1]
        top = np.concatenate([np.zeros(n - len(self.numerator)), self.numerator])[::-1] / self.denominator[0]
        return a, np.eye(n)[-1], top


def stepped(case):
    """Exact sub-step: x' = phi x + gamma u."""
    a, b, c = case.matrices
    n = b.size
    both = np.zeros((n + 1, n + 1))
    both[:n, :n], both[:n, n] = a, b
    one = expm(both * case.interval / SUB)
    return one[:n, :n], one[:n, n], c


def run(case, gains, samples, setpoint=1.0, disturbance=0.0):
    """Responses at the sub-steps, (samples * SUB, gains), trapezoid integral: u = K (e + reset * integral)."""
    phi, gamma, c = stepped(case)
    x, total, before = np.zeros((gamma.size, gains.size)), np.zeros(gains.size), None
    whole = case.late // SUB + 2
    sent = np.zeros((whole + samples, gains.size))
    out = np.empty((samples * SUB, gains.size))
    for k in range(samples):
        error = setpoint - c @ x
        total = total + (0.5 * case.interval * error if before is None else 0.5 * case.interval * (error + before))
        before = error
        sent[whole + k] = case.sign * gains * (error + case.reset * total) + disturbance
        for j in range(SUB):
            place = whole + (k * SUB + j - case.late) // SUB
            x = phi @ x + np.outer(gamma, sent[place])
            out[k * SUB + j] = c @ x
    return out


def sampled(case):
    """Phi, then what the command of d+1 and of d samples ago brings over one sample; and d."""
    phi, gamma, c = stepped(case)
    d, part = divmod(case.late, SUB)
    old, new, power = np.zeros_like(gamma), np.zeros_like(gamma), np.eye(gamma.size)
    for j in range(SUB):
        old, new = phi @ old + gamma * (j < part), phi @ new + gamma * (j >= part)
        power = phi @ power
    return power, old, new, c, d


def curve(case, w):
    """Open loop at K = 1 at angular frequencies w, rad/s."""
    power, old, new, c, d = sampled(case)
    z = np.exp(1j * w * case.interval)
    eye = np.eye(new.size)
    plant = np.array([c @ np.linalg.solve(zi * eye - power, new + old / zi) * zi**-d for zi in z])
    law = 1.0 + case.reset * 0.5 * case.interval * (z + 1.0) / (z - 1.0)
    return case.sign * law * plant


def is_stable(case, gain):
    """All eigenvalues of the closed loop inside the circle."""
    power, old, new, c, d = sampled(case)
    n = new.size
    size = n + d + 2  # x, u[k-1] ... u[k-d-1], integral of the error up to the sample before (with half of its last)
    matrix = np.zeros((size, size))
    k = case.sign * gain
    half = 0.5 * case.interval
    # stored = sum of trapezoids up to k-1 plus half the error at k-1; total = stored + half * error
    sent = np.zeros(size)
    sent[:n] = -k * (1.0 + case.reset * half) * c
    sent[-1] = k * case.reset
    matrix[:n, :n] = power
    matrix[:n, n + d] += old
    if d == 0:
        matrix[:n] += np.outer(new, sent)
    else:
        matrix[:n, n + d - 1] += new
    matrix[n] = sent
    for i in range(1, d + 1):
        matrix[n + i, n + i - 1] = 1.0
    matrix[-1, :n] = -2.0 * half * c
    matrix[-1, -1] = 1.0
    values = np.linalg.eigvals(matrix)
    if case.reset == 0.0:  # the integral is there and does nothing: its own pole at one doesn't count
        values = np.delete(values, np.argmin(np.abs(values - 1.0)))
    return bool(np.all(np.abs(values) < 1.0 - 1e-12))


def margins(case, gains, w, value):
    """Gain margin (dB, both ways), phase margin (deg), peak sensitivity of stable gains, from a dense sweep."""
    turn = np.angle(-value)
    cross = np.flatnonzero((turn[1:] * turn[:-1] < 0.0) & (np.abs(turn[1:]) < 1.5) & (np.abs(turn[:-1]) < 1.5))
    share = turn[cross] / (turn[cross] - turn[cross + 1])
    size = np.abs(value[cross]) ** (1.0 - share) * np.abs(value[cross + 1]) ** share
    at_rest = case.sign * case.numerator[-1] / case.denominator[-1] if case.denominator[-1] and not case.reset else 0.0
    ends = [-1.0 / v for v in (at_rest, value[-1].real) if v < 0.0]
    critical = np.concatenate([1.0 / size, ends])
    decibel, degrees, peak = [], [], []
    for k in gains:
        decibel.append(np.abs(20.0 * np.log10(critical / k)).min(initial=np.inf))
        level = np.log(k * np.abs(value))
        place = np.flatnonzero(level[1:] * level[:-1] < 0.0)
        part = level[place] / (level[place] - level[place + 1])
        angle = turn[place] + part * (np.angle(value[place + 1] / value[place]))
        degrees.append(np.degrees(np.abs(angle).min(initial=np.pi)))
        peak.append((1.0 / np.abs(1.0 + k * value)).max())
    return np.array(decibel), np.array(degrees), np.array(peak)
