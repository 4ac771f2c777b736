"""The requirements measured on a true response, by the definitions of the contract, with code of their own.

final: the steady value; overshoot: (peak - final)/|final - start| in the direction of the step; settling: last entry
into +- band |final - start| about final; rise: first 10 % to first 90 % of the way from start to final; steady-state
error: |setpoint - final|, the largest over the last fifth where it never settles. Time starts at the controller sample
that first sees the new setpoint.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]


@dataclass(frozen=True)
class Step:
    """What a step response amounts to; infinite where it never happens.

    Attributes
    ----------
    overshoot : float, fraction of |final - start|
    settling, rise : float, s
    error : float, response unit
    lowest, highest : float, response unit; fastest : response unit per s
    """

    overshoot: float
    settling: float
    rise: float
    error: float
    lowest: float
    highest: float
    fastest: float


def first_passage(time: FloatArray, share: FloatArray, level: float) -> float:
    """Time of the first upward passage through a level, straight between points."""
    above = np.flatnonzero(share >= level)
    if above.size == 0:
        return float("inf")
    k = int(above[0])
    if k == 0:
        return float(time[0])
    part = (level - share[k - 1]) / (share[k] - share[k - 1])
    return float(time[k - 1] + part * (time[k] - time[k - 1]))


def last_entry(time: FloatArray, distance: FloatArray, band: float) -> float:
    """Time of the last entry into |distance| <= band, straight between points; infinite if it ends outside."""
    outside = np.flatnonzero(np.abs(distance) > band)
    if outside.size == 0:
        return float(time[0])
    k = int(outside[-1])
    if k == len(time) - 1:
        return float("inf")
    a, b = abs(distance[k]), abs(distance[k + 1])
    return float(time[k] + (a - band) / (a - b) * (time[k + 1] - time[k])) if a != b else float(time[k + 1])


def measure_step(time: FloatArray, response: FloatArray, setpoint: float, start: float, band: float) -> Step:
    """Measure a step response.

    Parameters
    ----------
    time : (n,) array, s
        From the sample that first sees the setpoint; the record must go on long after it has settled.
    response : (n,) array, response unit
    start : float
        Steady response before the step.
    """
    tail = response[time >= 0.9 * time[-1]]
    final = float(np.mean(tail))
    way = final - start
    speed = np.abs(np.diff(response)) / np.maximum(np.diff(time), 1e-12 * time[-1])
    low, high, fastest = float(response.min()), float(response.max()), float(speed.max())
    if abs(way) < 0.1 * abs(setpoint - start) or not np.all(np.isfinite(response)):
        return Step(float("inf"), float("inf"), float("inf"), abs(setpoint - start), low, high, fastest)
    share = (response - start) / way
    settling = last_entry(time, share - 1.0, band)
    late = response[time >= 0.8 * time[-1]]
    steady = np.isfinite(settling) and settling < 0.8 * time[-1]
    error = abs(setpoint - final) if steady else float(np.max(np.abs(setpoint - late)))
    rise = first_passage(time, share, 0.9) - first_passage(time, share, 0.1)
    overshoot = max(0.0, float(share.max()) - 1.0)
    return Step(overshoot, settling if steady else float("inf"), rise, error, low, high, fastest)
