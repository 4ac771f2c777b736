"""From gains to the difference equation that a controller runs, for one law or many at once."""

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from ..ident.law import Clamp, Law
from ..ident.run import FloatArray
from .gains import Gains

LEAD_LAG = ("lead", "lag", "lead-lag")


@dataclass(frozen=True, eq=False)
class GainColumns:
    """Parallel gains of many laws of one structure, a column each.

    Attributes
    ----------
    structure : StructureName
    proportional, integral, derivative, filter_time, setpoint_weight, zero, pole, second_zero, second_pole : (c,) arrays
        Units as in `Gains`; zeros and poles are used by lead, lag and lead-lag only.
    """

    structure: str
    proportional: FloatArray
    integral: FloatArray
    derivative: FloatArray
    filter_time: FloatArray
    setpoint_weight: FloatArray
    zero: FloatArray
    pole: FloatArray
    second_zero: FloatArray = field(default_factory=lambda: np.zeros(0))
    second_pole: FloatArray = field(default_factory=lambda: np.zeros(0))

    @property
    def count(self) -> int:
        """How many laws."""
        return self.proportional.size

    def take(self, chosen: NDArray[np.int64]) -> "GainColumns":
        """The chosen columns, by index."""
        values = (self.proportional, self.integral, self.derivative, self.filter_time)
        rest = (self.setpoint_weight, self.zero, self.pole)
        second = (v[chosen] if v.size else v for v in (self.second_zero, self.second_pole))
        return GainColumns(self.structure, *(v[chosen] for v in values + rest), *second)

    def times(self, factor: FloatArray) -> "GainColumns":
        """The same zeros with the loop gain times (c,) `factor`."""
        return GainColumns(
            self.structure,
            self.proportional * factor,
            self.integral * factor,
            self.derivative * factor,
            self.filter_time + 0.0 * factor,
            self.setpoint_weight + 0.0 * factor,
            self.zero + 0.0 * factor,
            self.pole + 0.0 * factor,
            *(v + 0.0 * factor if v.size else v for v in (self.second_zero, self.second_pole)),
        )


@dataclass(frozen=True, eq=False)
class LawColumns:
    """Coefficients of many laws: four (3, c) arrays, the present sample first (see `Law`)."""

    command: FloatArray
    setpoint: FloatArray
    response: FloatArray
    memory: FloatArray

    def take(self, chosen: NDArray[np.int64]) -> "LawColumns":
        """The chosen columns, by index."""
        return LawColumns(*(a[:, chosen] for a in (self.command, self.setpoint, self.response, self.memory)))


def columns_of(gains: Sequence[Gains]) -> GainColumns:
    """Lay out gains of one structure as columns."""

    def gather(name: str) -> FloatArray:
        return np.array([float(getattr(g, name) or 0.0) for g in gains])

    names = ["proportional", "integral", "derivative", "filter_time", "setpoint_weight", "zero", "pole"]
    names += ["second_zero", "second_pole"] if gains[0].structure == "lead-lag" else []
    return GainColumns(gains[0].structure, *(gather(name) for name in names))


def gains_of(columns: GainColumns, index: int) -> Gains:
    """One column as `Gains`."""
    network = columns.structure in LEAD_LAG
    return Gains(
        columns.structure,  # type: ignore[arg-type]
        float(columns.proportional[index]),
        float(columns.integral[index]),
        float(columns.derivative[index]),
        float(columns.filter_time[index]),
        float(columns.setpoint_weight[index]),
        float(columns.zero[index]) if network else None,
        float(columns.pole[index]) if network else None,
        float(columns.second_zero[index]) if columns.second_zero.size else None,
        float(columns.second_pole[index]) if columns.second_pole.size else None,
    )


def law_columns(gains: GainColumns, interval: float) -> LawColumns:
    """Difference equations of many laws at one update interval.

    The integral is summed by the trapezoid, the filtered derivative is ramp-invariant (pole exp(-T/Tf), gain D at low
    frequency) and acts on minus the response; lead and lag are mapped by the bilinear rule. The memory polynomial makes
    the integral track a clamped command with the time constant `tracking_time`; without a clamp it drops out.

    Parameters
    ----------
    gains : GainColumns
    interval : float, s

    Returns
    -------
    LawColumns
        With integral action each column of `command` sums to zero exactly, in floating point.

    References
    ----------
    Bilinear (trapezoid) rule 1/(s+1) -> (z+1)/(3z-1) at T = 1 s: exact law.
    """
    if gains.structure in LEAD_LAG:
        return _network(gains, interval)
    integrating = (gains.integral != 0.0).astype(float)
    fade = _derivative_pole(gains, interval)
    command = _exact_product(integrating, fade)
    step = 0.5 * interval * gains.integral
    kick = np.where(gains.derivative != 0.0, gains.derivative * (1.0 - fade) / interval, 0.0)
    one = np.ones_like(fade)
    weighted = gains.setpoint_weight * gains.proportional
    setpoint = _product((weighted + step, step - integrating * weighted), (one, -fade))
    error = _product((gains.proportional + step, step - integrating * gains.proportional), (one, -fade))
    bumps = _product((kick, -kick), (one, -integrating))
    keep = np.where(integrating > 0.0, _memory_pole(gains, interval), 0.0)
    tracked = _product((one, -keep), (one, -fade))
    return LawColumns(command, setpoint, error + bumps, np.where(integrating > 0.0, tracked, command))


def law_from_gains(gains: Gains, interval: float, clamp: Clamp | None = None) -> Law:
    """The law that is shipped: the very coefficients that the design is checked with.

    Examples
    --------
    >>> law = law_from_gains(Gains("PI", proportional=2.0, integral=4.0), 0.1)
    >>> law.command, law.setpoint
    ((1.0, -1.0), (2.2, -1.8))
    """
    columns = law_columns(columns_of([gains]), interval)
    length = _length(columns)
    command, setpoint, response, memory = (
        tuple(float(x) for x in a[:length, 0])
        for a in (columns.command, columns.setpoint, columns.response, columns.memory)
    )
    return Law(interval, command, setpoint, response, memory, Clamp() if clamp is None else clamp)


def columns_of_law(law: Law) -> LawColumns:
    """A given law as one column, padded to three coefficients."""

    def pad(values: tuple[float, ...]) -> FloatArray:
        return np.array([*values, 0.0, 0.0, 0.0][:3])[:, None]

    return LawColumns(pad(law.command), pad(law.setpoint), pad(law.response), pad(law.memory))


def tracking_time(gains: GainColumns) -> FloatArray:
    """(c,) time constant in s with which a clamped integral follows: Ti, or sqrt(Ti Td) with a derivative.

    References
    ----------
    Choice of the tracking time: common practice, no source.
    """
    with np.errstate(divide="ignore", invalid="ignore"):
        reset = np.where(gains.integral != 0.0, np.abs(gains.proportional / gains.integral), 0.0)
        lead = np.where(gains.proportional != 0.0, np.abs(gains.derivative / gains.proportional), 0.0)
    return np.where(lead > 0.0, np.sqrt(reset * lead), reset)


def _memory_pole(gains: GainColumns, interval: float) -> FloatArray:
    time = tracking_time(gains)
    return np.where(time > 0.0, np.exp(-interval / np.maximum(time, 1e-3 * interval)), 0.0)


def _derivative_pole(gains: GainColumns, interval: float) -> FloatArray:
    active = (gains.derivative != 0.0) & (gains.filter_time > 0.0)
    return np.where(active, np.exp(-interval / np.where(active, gains.filter_time, interval)), 0.0)


def _exact_product(first: FloatArray, second: FloatArray) -> FloatArray:
    """(1 - first q)(1 - second q); where first is one the three coefficients sum to zero exactly."""
    middle = -(first + second)
    last = np.where(first == 1.0, -(1.0 + middle), first * second)
    return np.array([np.ones_like(middle), middle, last])


def _product(a: tuple[FloatArray, FloatArray], b: tuple[FloatArray, FloatArray]) -> FloatArray:
    return np.array([a[0] * b[0], a[0] * b[1] + a[1] * b[0], a[1] * b[1]])


def _network(gains: GainColumns, interval: float) -> LawColumns:
    """P (s + z)/(s + p), for lead-lag two in series, on the error, by the bilinear rule."""
    top, command = _section(gains.zero, gains.pole, interval)
    if gains.structure == "lead-lag":
        above, below = _section(gains.second_zero, gains.second_pole, interval)
        top, command = (
            _product((top[0], top[1]), (above[0], above[1])),
            _product((command[0], command[1]), (below[0], below[1])),
        )
    top = gains.proportional * top
    return LawColumns(command, top, top, command)


def _section(zero: FloatArray, pole: FloatArray, interval: float) -> tuple[FloatArray, FloatArray]:
    """(3, c) numerator and denominator of (s + z)/(s + p)."""
    twice = 2.0 / interval
    bottom = twice + pole
    top = np.array([twice + zero, zero - twice, 0.0 * bottom]) / bottom
    return top, np.array([np.ones_like(bottom), (pole - twice) / bottom, 0.0 * bottom])


def _length(columns: LawColumns) -> int:
    used = [np.abs(a[:, 0]) > 0.0 for a in (columns.command, columns.setpoint, columns.response, columns.memory)]
    return int(np.flatnonzero(np.any(used, axis=0))[-1]) + 1
