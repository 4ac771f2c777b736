"""What is seen of a held-out step, predicted beside measured: overshoot, rise, settling, final value.

Both sides are measured by the same rules on the same stretch of the record. The predicted interval comes from the
plausible plants; the measured one from noise of the fitted colour, added to the prediction many times: what it does to
each measure on average is taken off, and how far it scatters it is the interval.
"""

from dataclasses import dataclass
from typing import Literal

import numpy as np
from scipy.signal import lfilter

from ...ident.fitted import Fit, Noise
from ...ident.run import FloatArray, Run
from ..step_metrics import overshoot, rise_time, settling_time

_COPIES = 60  # of the noise
_LEAST = 30  # samples of a step worth looking at
_REST = 0.1  # of the stretch before and of the step: where start and final value are read
_NEVER = 0.5  # of the copies that never settle or rise: then nobody can say when
_BAND = 0.05  # where no settling time is asked for
_VISIBLE = 4.0  # times the noise: a smaller movement shows nothing
_UNITS: dict[str, Literal["1", "s", "response"]] = {"overshoot": "1", "final value": "response"}


@dataclass(frozen=True)
class Sight:
    """One measure, predicted and measured, each with its 95 % interval; None: never, or not to be seen for noise.

    Attributes
    ----------
    name : {"overshoot", "rise time", "settling time", "final value"}
        Final value: from the response before the step; of an integrating plant, its move over the stretch.
    unit : {"1", "s", "response"}
    """

    name: str
    unit: Literal["1", "s", "response"]
    predicted: float | None
    predicted_interval: tuple[float, float] | None
    measured: float | None
    measured_interval: tuple[float, float] | None


@dataclass(frozen=True)
class StepSight:
    """A step of the record and what is seen of it.

    Attributes
    ----------
    moved : {"command", "setpoint"}
    at, until : float, s
        Of the record's time.
    start, end : float
        Of what moved, its unit.
    band : float
        Of the settling time, a fraction of the step.
    sights : tuple of Sight
    """

    moved: Literal["command", "setpoint"]
    at: float
    until: float
    start: float
    end: float
    band: float
    sights: tuple[Sight, ...]


def see(run: Run, fit: Fit, predicted: FloatArray, runs: FloatArray, band: float | None) -> StepSight | None:
    """Look at the largest step that is held long enough; None where the record has none.

    Parameters
    ----------
    predicted : (n,) array, response unit
    runs : (k, n) array, response unit
        Free runs of plausible plants.
    band : float or None
        Of the settling time that is asked for.
    """
    moving: FloatArray = run.setpoint if run.closed_loop and run.setpoint is not None else run.command
    place = _largest_step(moving, run, fit)
    if place is None:
        return None
    before, first, last = place
    wide = _BAND if band is None else band
    filled = _filled(run.response)
    noise = _noise(fit.noise, len(filled))
    copies = predicted[None, :] + noise * _size(filled, noise)
    sights = []
    many = np.vstack([predicted, filled, runs, copies])
    table = _measures(many[:, before : last + 1], first - before, run.time[before : last + 1], wide, fit)
    count = len(runs)
    for name, values in table.items():
        own, measured, spread, noisy = values[0], values[1], values[2 : 2 + count], values[2 + count :]
        unit = _UNITS.get(name, "s")
        told = _interval(spread) if count > 1 else None
        seen = _read(float(measured), float(own), noisy, floor=0.0 if unit != "response" else -np.inf)
        sights.append(Sight(name, unit, _finite(float(own)), told, *seen))
    moved: Literal["command", "setpoint"] = "command" if moving is run.command else "setpoint"
    start, end = float(moving[first - 1]), float(moving[first])
    return StepSight(moved, float(run.time[first]), float(run.time[last]), start, end, wide, tuple(sights))


def _largest_step(moving: FloatArray, run: Run, fit: Fit) -> tuple[int, int, int] | None:
    """First sample of the hold before, of the step, and last of the step."""
    edges = np.flatnonzero(np.diff(moving) != 0.0) + 1
    bounds = [0, *edges.tolist(), len(moving)]
    best, place = 0.0, None
    for before, first, end in zip(bounds[:-2], bounds[1:-1], bounds[2:], strict=True):
        size = abs(float(moving[first] - moving[first - 1]))
        held = float(run.time[end - 1] - run.time[first])
        visible = size * abs(fit.plant.static_gain) * (held if fit.plant.integrators else 1.0)
        if end - first >= _LEAST and first - before >= 3 and size > best and visible > _VISIBLE * fit.noise.std:
            best, place = size, (before, first, end - 1)
    return place


def _filled(values: FloatArray) -> FloatArray:
    """Lost samples bridged."""
    known = np.isfinite(values)
    return values if known.all() else np.interp(np.arange(len(values)), np.flatnonzero(known), values[known])


def _noise(noise: Noise, count: int) -> FloatArray:
    """(copies, n) of noise with the fitted size and colour."""
    white = np.random.default_rng(0).standard_normal((_COPIES, count + 200))
    coloured = lfilter([1.0, noise.c], [1.0, -noise.rho], white, axis=1)[:, 200:]
    size = np.std(coloured)
    return np.asarray(coloured * (noise.std / size if size > 0.0 else 0.0))


def _size(values: FloatArray, noise: FloatArray) -> float:
    """How the record's own noise compares, by the middle of its second differences: the response hardly enters."""
    own, fitted = (float(np.median(np.abs(np.diff(v, 2)))) for v in (values, noise))
    return own / fitted if own > 0.0 and fitted > 0.0 else 1.0


def _measures(many: FloatArray, first: int, time: FloatArray, band: float, fit: Fit) -> dict[str, FloatArray]:
    """Each measure of each row, (k,); inf: never."""
    rest = many[:, max(0, first - max(3, int(_REST * first))) : first]
    step = many[:, first:]
    tail = max(3, int(_REST * step.shape[1]))
    start, final = rest.mean(axis=1), step[:, -tail:].mean(axis=1)
    if fit.plant.integrators:
        return {"final value": step[:, -3:].mean(axis=1) - start}
    way = final - start
    spacing = float(time[-1] - time[first]) / max(len(time) - 1 - first, 1)
    response = (step - start[:, None])[:, 1:].T
    with np.errstate(divide="ignore", invalid="ignore"):
        return {
            "overshoot": overshoot(response, way),
            "rise time": rise_time(response, way, spacing),
            "settling time": settling_time(response, way, band, spacing),
            "final value": way,
        }


def _interval(values: FloatArray) -> tuple[float, float] | None:
    """95 % of the values; None where some never come."""
    if not np.all(np.isfinite(values)):
        return None
    low, high = np.quantile(values, [0.025, 0.975])
    return float(low), float(high)


def _read(
    measured: float, own: float, noisy: FloatArray, floor: float
) -> tuple[float | None, tuple[float, float] | None]:
    """A measured value less what noise adds to it, and its interval."""
    came = noisy[np.isfinite(noisy)]
    if not np.isfinite(measured) or len(came) <= _NEVER * len(noisy) or not np.isfinite(own):
        return None, None
    value = measured - float(np.mean(came) - own)
    low, high = np.quantile(came - np.mean(came), [0.025, 0.975])
    return max(value, floor), (max(value - float(high), floor), max(value - float(low), floor))


def _finite(value: float) -> float | None:
    return value if np.isfinite(value) else None
