"""A sampled loop on a true plant, written out from its matrices: nothing of the program is used here.

The plant is stepped exactly between the instants at which its delayed command changes and the controller samples; the
law is a difference equation, many of them at once.
"""

from dataclasses import dataclass

import numpy as np
from scipy.linalg import expm

FINE = 5  # points in each of the two parts of a sample


@dataclass(frozen=True)
class Truth:
    """A strictly proper plant: polynomials with the highest power of s first, dead time in s."""

    numerator: tuple[float, ...]
    denominator: tuple[float, ...]
    dead_time: float

    @property
    def matrices(self):
        """A, B, C."""
        below = np.array(self.denominator) / self.denominator[0]
        n = below.size - 1
        a = np.eye(n, k=1)
        a[-1] = -below[:0:-1]
        above = np.concatenate([np.zeros(n - len(self.numerator)), self.numerator])[::-1] / self.denominator[0]
        return a, np.eye(n)[-1], above


@dataclass(frozen=True, eq=False)
class Equation:
    """c laws: u[k] = sum setpoint r - sum response y - sum over the past of command u; (m, c) arrays, present first."""

    interval: float
    command: np.ndarray
    setpoint: np.ndarray
    response: np.ndarray

    def at(self, z):
        """(w, c) response of the law, from -y to u."""
        powers = z[:, None] ** -np.arange(self.command.shape[0])
        return (powers @ self.response) / (powers @ self.command)


def pid_laws(interval, proportional, integral, derivative, filter_time):
    """PID on c columns: trapezoid integral, derivative of minus the response through a first-order filter."""
    fade = np.exp(-interval / np.maximum(filter_time, 1e-9))
    kick, half = derivative * (1.0 - fade) / interval, 0.5 * interval * integral
    one, none = np.ones_like(fade), np.zeros_like(fade)
    error = (proportional + half, half - proportional)

    def faded(pair):
        return np.array([pair[0], pair[1] - fade * pair[0], -fade * pair[1]])

    bumps = np.array([kick, -2.0 * kick, kick])
    return Equation(interval, faded((one, none - 1.0)), faded(error), faded(error) + bumps)


def one_step(a, b, time):
    """x' = phi x + gamma u over a time."""
    n = b.size
    both = np.zeros((n + 1, n + 1))
    both[:n, :n], both[:n, n] = a * time, b * time
    both = expm(both)
    return both[:n, :n], both[:n, n]


def run(truth, laws, samples, setpoint=1.0, disturbance=0.0):
    """Times and responses, (t,) and (t, c): a setpoint or disturbance step at sample 0 from rest."""
    a, b, c = truth.matrices
    interval = laws.interval
    whole = int(np.floor(truth.dead_time / interval + 1e-9))
    late = max(truth.dead_time - whole * interval, 0.0)
    parts = [(late, 1), (interval - late, 0)]
    moves = [(*one_step(a, b, time / FINE), back, time / FINE) for time, back in parts if time > 1e-9 * interval]
    count, past = laws.command.shape[1], laws.command.shape[0]
    sent = np.zeros((samples + whole + past + 2, count))
    seen = np.zeros((samples + past, count))
    asked = np.zeros(samples + past)
    asked[past:] = setpoint
    first = whole + past + 2 - 0
    x, now = np.zeros((b.size, count)), 0.0
    times, out = [], []
    with np.errstate(all="ignore"):
        for k in range(samples):
            seen[past + k] = c @ x
            u = sum(laws.setpoint[i] * asked[past + k - i] - laws.response[i] * seen[past + k - i] for i in range(past))
            u = u - sum(laws.command[i] * sent[first + k - i] for i in range(1, past))
            sent[first + k] = u
            for phi, gamma, back, time in moves:
                place = first + k - whole - back
                held = sent[place] + (disturbance if place >= first else 0.0)
                for _ in range(FINE):
                    x = phi @ x + np.outer(gamma, held)
                    now += time
                    times.append(now)
                    out.append(c @ x)
    return np.array(times), np.array(out)


def plant_curve(truth, interval, w):
    """Pulse transfer function on the unit circle at angular frequencies w."""
    a, b, c = truth.matrices
    whole = int(np.floor(truth.dead_time / interval + 1e-9))
    late = max(truth.dead_time - whole * interval, 0.0)
    phi, _ = one_step(a, b, interval)
    rest, newer = one_step(a, b, interval - late)
    older = rest @ one_step(a, b, late)[1]
    z = np.exp(1j * w * interval)
    eye = np.eye(b.size)
    return np.array([c @ np.linalg.solve(s * eye - phi, newer + older / s) * s**-whole for s in z])


def peak_sensitivity(truth, laws, points=700):
    """(c,) largest 1/|1 + L| on the unit circle; meaningful where the loop is stable."""
    slow = 1e-3 / (truth.dead_time + laws.interval)
    w = np.geomspace(slow, np.pi / laws.interval, points)
    loop = plant_curve(truth, laws.interval, w)[:, None] * laws.at(np.exp(1j * w * laws.interval))
    return (1.0 / np.abs(1.0 + loop)).max(axis=0)


def ultimate(truth, interval):
    """Gain and period at which a sampled P controller just keeps the loop swinging: the first crossing."""
    w = np.geomspace(1e-3 / (truth.dead_time + interval), np.pi / interval * 0.999, 4000)
    value = plant_curve(truth, interval, w)
    turn = np.angle(-value)
    place = np.flatnonzero((turn[:-1] > 0.0) & (turn[1:] <= 0.0) & (turn[:-1] - turn[1:] < 1.0))[0]
    share = turn[place] / (turn[place] - turn[place + 1])
    at = w[place] ** (1.0 - share) * w[place + 1] ** share
    return 1.0 / float(np.abs(plant_curve(truth, interval, np.array([at]))[0])), 2.0 * np.pi / at


def step_values(times, out, band=0.02):
    """Overshoot and settling time of c unit steps; settling inf where the last fifth leaves the band about one."""
    settled = np.abs(out - 1.0) <= band
    calm = np.all(settled[int(0.8 * len(times)) :], axis=0) & np.isfinite(out[-1])
    last = len(times) - 1 - np.argmax(~settled[::-1], axis=0)
    time = np.where(settled.all(axis=0), 0.0, times[np.minimum(last + 1, len(times) - 1)])
    return np.nan_to_num(out.max(axis=0) - 1.0, nan=np.inf), np.where(calm, time, np.inf)
