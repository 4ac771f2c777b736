"""The same controller in parallel, standard, series and zero-pole form, each number with its unit."""

import math
from dataclasses import dataclass

from .compensator import over_second, per_response, times_second
from .discretise import LEAD_LAG
from .gains import Gains


@dataclass(frozen=True)
class Quantity:
    """A number with its unit."""

    value: float
    unit: str


Form = dict[str, Quantity]

_SLIP = 1e-12  # Ti = 4 Td within rounding still has a series form: its double zero


def forms_of(gains: Gains, command_unit: str, response_unit: str) -> dict[str, Form | None]:
    """All four forms; one that does not exist is None.

    parallel: P + I/s on the error, D s/(Tf s + 1) on minus the response. standard: G (1 + 1/(Ti s) + Td s/(Tf s + 1)).
    series: G (1 + 1/(Ti s)) (Td s + 1)/(Tf s + 1). zero-pole: G (s + zero)/(s + pole).

    Returns
    -------
    dict
        "parallel", "standard", "series", "zero-pole".

    References
    ----------
    Åström and Hägglund, Advanced PID Control (ISA, 2006), section 3.2: standard and series form.
    """
    per = per_response(command_unit, response_unit)
    network = gains.structure in LEAD_LAG
    return {
        "parallel": None if network else _parallel(gains, per, over_second(command_unit, response_unit)),
        "standard": None if network else _timed(standard(gains), per),
        "series": None if network else _timed(series(gains), per),
        "zero-pole": _zero_pole(gains, per) if network else None,
    }


@dataclass(frozen=True)
class Timed:
    """Gain and times of a standard or series form; None where the part is missing.

    Attributes
    ----------
    gain : float
    integral_time, derivative_time, filter_time : float or None, s
    """

    gain: float
    integral_time: float | None
    derivative_time: float | None
    filter_time: float | None


def standard(gains: Gains) -> Timed | None:
    """G = P, Ti = P/I, Td = D/P; None without a proportional part.

    Examples
    --------
    >>> standard(Gains("PID", proportional=2.5, integral=0.25, derivative=4.0))
    Timed(gain=2.5, integral_time=10.0, derivative_time=1.6, filter_time=0.0)
    """
    if gains.proportional == 0.0:
        return None
    derivative = gains.derivative != 0.0
    return Timed(
        gains.proportional,
        gains.proportional / gains.integral if gains.integral else None,
        gains.derivative / gains.proportional if derivative else None,
        gains.filter_time if derivative else None,
    )


def series(gains: Gains) -> Timed | None:
    """The form with real zeros in series; None where the zeros are complex or it would need a time below zero.

    The numerator of P + I/s + D s/(Tf s + 1) over s (Tf s + 1) is matched with that of the series form, both with the
    same filter: G (Ti s + 1)(Td s + 1)/Ti = (D + P Tf) s^2 + (P + I Tf) s + I.
    """
    if gains.proportional == 0.0:
        return None
    if gains.derivative == 0.0:
        return standard(gains)
    top, middle, last = (
        gains.derivative + gains.proportional * gains.filter_time,
        gains.proportional + gains.integral * gains.filter_time,
        gains.integral,
    )
    if last == 0.0:
        return Timed(middle, None, top / middle, gains.filter_time)
    return _from_zeros(top, middle, last, gains.filter_time)


def _from_zeros(top: float, middle: float, last: float, filter_time: float) -> Timed | None:
    """Ti + Td = middle/last and Ti Td = top/last; the longer time is Ti."""
    total, product = middle / last, top / last
    discriminant = total * total - 4.0 * product
    if discriminant < -_SLIP * total * total or product < 0.0:
        return None
    longer = 0.5 * (total + math.sqrt(max(discriminant, 0.0)))
    return Timed(last * longer, longer, product / longer, filter_time)


def from_standard(form: Timed, structure: str) -> Gains:
    """Parallel gains of a standard form."""
    return Gains(
        structure,  # type: ignore[arg-type]
        form.gain,
        form.gain / form.integral_time if form.integral_time else 0.0,
        form.gain * (form.derivative_time or 0.0),
        form.filter_time or 0.0,
    )


def from_series(form: Timed, structure: str) -> Gains:
    """Parallel gains of a series form, the filter kept.

    Examples
    --------
    >>> gains = from_series(Timed(2.0, 8.0, 2.0, 0.0), "PID")
    >>> gains.proportional, gains.integral, gains.derivative
    (2.5, 0.25, 4.0)
    """
    lag, lead = form.filter_time or 0.0, form.derivative_time or 0.0
    integral = form.gain / form.integral_time if form.integral_time else 0.0
    longer = form.integral_time or 0.0
    proportional = (integral * (longer + lead) if integral else form.gain) - integral * lag
    derivative = (integral * longer * lead if integral else form.gain * lead) - proportional * lag
    return Gains(structure, proportional, integral, derivative, lag)  # type: ignore[arg-type]


def _parallel(gains: Gains, per: str, over: str) -> Form:
    return {
        "proportional": Quantity(gains.proportional, per),
        "integral": Quantity(gains.integral, over),
        "derivative": Quantity(gains.derivative, times_second(per)),
        "derivative_filter_time": Quantity(gains.filter_time, "s"),
    }


def _timed(form: Timed | None, per: str) -> Form | None:
    if form is None:
        return None
    found: Form = {"gain": Quantity(form.gain, per)}
    for name, value in (
        ("integral_time", form.integral_time),
        ("derivative_time", form.derivative_time),
        ("derivative_filter_time", form.filter_time),
    ):
        if value is not None:
            found[name] = Quantity(value, "s")
    return found


def _zero_pole(gains: Gains, per: str) -> Form:
    found = {
        "gain": Quantity(gains.proportional, per),
        "zero": Quantity(float(gains.zero or 0.0), "1/s"),
        "pole": Quantity(float(gains.pole or 0.0), "1/s"),
    }
    if gains.structure == "lead-lag":
        found["second_zero"] = Quantity(float(gains.second_zero or 0.0), "1/s")
        found["second_pole"] = Quantity(float(gains.second_pole or 0.0), "1/s")
    return found
