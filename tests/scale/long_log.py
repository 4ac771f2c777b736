"""An invented log of any length, written part by part: two lags behind a dead time, steps of drawn size and length.

It imports nothing of gainwright.
"""

from pathlib import Path

import h5py
import numpy as np
from scipy.signal import lfilter

INTERVAL = 1e-4  # s
GAIN, LAGS, DEAD_TIME, LEVEL = 2.0, (1.0, 0.2), 0.05, 30.0  # mm/V, s, s, mm
NOISE = 0.05  # mm, white
SLOW_NOISE, SLOW_LAG = 0.02, 0.01  # mm, s
PART = 1_000_000

RIG = """
[rig]
name = "long log"
[signals]
time = {{ {time} }}
command = {{ source = "drive", unit = "V" }}
response = {{ source = "pos", unit = "mm" }}
[[runs]]
file = "{file}"
use = "fit"
[controller]
update_interval = "{update_interval}"
structures = ["PI"]
[requirements]
test_step = "2 mm"
overshoot = {{ at_most = "20 %" }}
[limits]
command = {{ lowest = "-10 V", highest = "10 V" }}
response = "not limited"
"""


def rig_text(file: str, *, time: str = 'sample_rate = "10 kHz"', update_interval: str = "20 ms") -> str:
    """A rig file for it."""
    return RIG.format(file=file, time=time, update_interval=update_interval)


def parts(samples: int, seed: int, part: int = PART):
    """Yield command and response, V and mm, `part` samples at a time; the plant exact for a held command."""
    rng = np.random.default_rng(seed)
    poles = [np.exp(-INTERVAL / lag) for lag in LAGS]
    slow = np.exp(-INTERVAL / SLOW_LAG)
    states = [np.zeros(1) for _ in range(3)]
    late = np.zeros(round(DEAD_TIME / INTERVAL))
    level, left = 0.0, 20_000  # at rest first
    done = 0
    while done < samples:
        count = min(part, samples - done)
        command = np.empty(count)
        filled = 0
        while filled < count:
            run = min(left, count - filled)
            command[filled : filled + run] = level
            filled, left = filled + run, left - run
            if left == 0:
                level, left = float(rng.uniform(-3.0, 3.0)), int(rng.integers(5_000, 30_000))
        joined = np.concatenate([late, command])
        delayed, late = joined[:count], joined[count:]
        # y[k] from u[k-1]: partial fractions of the two lags, each exact for a held input
        weights = (LAGS[0] / (LAGS[0] - LAGS[1]), -LAGS[1] / (LAGS[0] - LAGS[1]))
        response = np.full(count, LEVEL)
        for place, (pole, weight) in enumerate(zip(poles, weights, strict=True)):
            moved, states[place] = lfilter([0.0, 1.0 - pole], [1.0, -pole], delayed, zi=states[place])
            response += GAIN * weight * moved
        coloured, states[2] = lfilter(
            [SLOW_NOISE * np.sqrt(1.0 - slow**2)], [1.0, -slow], rng.standard_normal(count), zi=states[2]
        )
        yield command, response + coloured + NOISE * rng.standard_normal(count)
        done += count


def write_hdf5(path: Path, samples: int, seed: int, *, clock: bool = False) -> None:
    """`drive` and `pos`, and `time` where a clock is wanted, in chunks of 64 ki samples."""
    with h5py.File(path, "w") as file:
        names = ("time", "drive", "pos") if clock else ("drive", "pos")
        kinds = {"drive": "f4"}
        made = {
            name: file.create_dataset(name, (samples,), dtype=kinds.get(name, "f8"), chunks=(65536,)) for name in names
        }
        done = 0
        for command, response in parts(samples, seed):
            place = slice(done, done + len(command))
            made["drive"][place], made["pos"][place] = command, response
            if clock:
                made["time"][place] = INTERVAL * np.arange(place.start, place.stop)
            done = place.stop
