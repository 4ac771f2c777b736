"""Responses written out as sums of step responses in closed form: a truth that knows nothing of the code under test.

A held command is a sum of steps; every plant here has its step response in a formula of any textbook:

lag                  1 - exp(-t/T)
two lags             1 - (T1 exp(-t/T1) - T2 exp(-t/T2))/(T1 - T2), equal ones 1 - (1 + t/T) exp(-t/T)
resonance            1 - exp(-z wn t) (cos wd t + z wn/wd sin wd t), wd = wn sqrt(1 - z^2)
integrator           t
integrator with lag  t - T (1 - exp(-t/T))
"""

import numpy as np


def lag(time_constant):
    """Step response of 1/(T s + 1)."""
    return lambda t: -np.expm1(-t / time_constant)


def two_lags(slow, fast):
    """Step response of 1/((T1 s + 1)(T2 s + 1))."""
    if slow == fast:
        return lambda t: 1 - (1 + t / slow) * np.exp(-t / slow)
    return lambda t: 1 - (slow * np.exp(-t / slow) - fast * np.exp(-t / fast)) / (slow - fast)


def resonance(frequency, damping):
    """Step response of wn^2/(s^2 + 2 z wn s + wn^2), z < 1."""
    ringing = frequency * np.sqrt(1 - damping**2)
    decay = damping * frequency
    return lambda t: 1 - np.exp(-decay * t) * (np.cos(ringing * t) + decay / ringing * np.sin(ringing * t))


def integrator():
    """Step response of 1/s."""
    return lambda t: t


def integrator_with_lag(time_constant):
    """Step response of 1/(s (T s + 1))."""
    return lambda t: t + time_constant * np.expm1(-t / time_constant)


def response(step, gain, dead_time, time, command, before):
    """(n,) response, from rest at zero, to a command held between its samples."""
    out = np.zeros(len(time))
    last = before
    for when, level in zip(time, command, strict=True):
        if level != last:
            since = time - when - dead_time
            out += gain * (level - last) * np.where(since > 0, step(np.maximum(since, 0.0)), 0.0)
            last = level
    return out


def steps(time, profile, before):
    """(n,) command: `before`, then each (instant, level) of the profile."""
    out = np.full(len(time), float(before))
    for when, level in profile:
        out[time >= when - 1e-9] = level
    return out


def coloured(rng, count, std, rho=0.0, c=0.0):
    """(n,) stationary noise e[k] = rho e[k-1] + w[k] + c w[k-1] of this standard deviation."""
    burn = 600 if rho else 1
    w = rng.standard_normal(count + burn)
    out = np.zeros(count + burn)
    for k in range(1, count + burn):
        out[k] = rho * out[k - 1] + w[k] + c * w[k - 1]
    ratio = (1 + 2 * rho * c + c * c) / (1 - rho * rho)
    return std * out[burn:] / np.sqrt(ratio)
