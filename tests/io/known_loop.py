"""Logs of an invented rig under a PI controller, exact: a lag with a dead time of whole samples, held commands."""

from dataclasses import dataclass
from pathlib import Path

import numpy as np
from scipy.signal import lfilter

GAIN, LAG, DEAD_TIME, INTERVAL = 2.0, 1.0, 0.2, 0.05
COMMAND, RESPONSE = 3.0, 50.0
PROPORTIONAL, INTEGRAL = 0.8, 0.6


@dataclass(frozen=True, eq=False)
class Made:
    """(n,) arrays: time in s, setpoint and response in mm, command in V."""

    time: np.ndarray
    setpoint: np.ndarray
    command: np.ndarray
    response: np.ndarray


def run_loop(seed: int, seconds: float = 60.0, noise: float = 0.05, size: float = 2.0, dither: float = 0.0,
             gain: float = GAIN, colour: float = 0.0) -> Made:  # fmt: skip
    """PI by the trapezoid at each sample; setpoint steps of +-`size` mm, noise of `noise` mm is fed back."""
    random = np.random.default_rng(seed)
    count = round(seconds / INTERVAL)
    levels = size * np.concatenate([[0.0], random.choice([-1.0, 1.0], count // 100 + 1)])
    goal = np.repeat(levels, 100)[:count]
    white = random.standard_normal(count) * np.sqrt(1 - colour**2)
    error = noise * lfilter([1.0], [1.0, -colour], white)
    added = dither * random.choice([-1.0, 1.0], count)
    pole, late = np.exp(-INTERVAL / LAG), round(DEAD_TIME / INTERVAL)
    state = integral = before = 0.0
    command, response = np.zeros(count), np.zeros(count)
    for k in range(count):
        response[k] = state + error[k]
        off = goal[k] - response[k]
        integral += 0.5 * INTERVAL * INTEGRAL * (off + before)
        before = off
        command[k] = PROPORTIONAL * off + integral + added[k]
        sent = command[k - late] if k >= late else 0.0
        state = pole * state + gain * (1 - pole) * sent
    time = INTERVAL * np.arange(count)
    return Made(time, RESPONSE + goal, COMMAND + command, RESPONSE + response)


def write(path: Path, made: Made, columns: str = "truy", every: int = 1) -> None:
    """CSV with the columns t, r, u, y that are asked for, each `every`-th sample."""
    arrays = {"t": made.time, "r": made.setpoint, "u": made.command, "y": made.response}
    table = np.column_stack([arrays[name] for name in columns])[::every]
    np.savetxt(path, table, fmt="%.9g", delimiter=",", header=",".join(columns), comments="", encoding="utf-8")
