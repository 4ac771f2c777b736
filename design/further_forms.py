"""The same gains as other controllers want them: minutes, repeats, per sample, proportional band, zeros; and back.

A form that doesn't exist for some gains is a `Missing` that says why.
"""

import math
from dataclasses import dataclass, replace

import numpy as np

from .compensator import loop_gain, loop_gain_unit, per_response, shape_of
from .discretise import LEAD_LAG
from .forms import Form, Quantity, Timed, from_standard, series, standard
from .gains import Gains

_MINUTE = 60.0  # s
_TIMES = ("integral_time", "derivative_time", "derivative_filter_time")


@dataclass(frozen=True)
class Missing:
    """A form that these gains don't have.

    Attributes
    ----------
    why : str
        A clause: "there is no proportional part".
    """

    why: str


@dataclass(frozen=True)
class Spans:
    """Full ranges of the signals; None: not known.

    Attributes
    ----------
    command, response : float or None, in the unit of the signal; positive
    """

    command: float | None = None
    response: float | None = None


def further_forms(
    gains: Gains, command_unit: str, response_unit: str, interval: float | None, spans: Spans
) -> dict[str, Form | Missing]:
    """Forms beside the four of `forms_of`.

    "standard, minutes": its times in min. "standard, repeats": 1/Ti in 1/s and 1/min in place of Ti. "per sample":
    proportional, integral * T, derivative / T, as a sum of errors and a difference of responses want them.
    "proportional band": 100 %/G in shares of both ranges. "zeros": K and the zeros of the compensator.

    Parameters
    ----------
    interval : float or None, s
        Update interval; None: continuous.
    spans : Spans
    """
    per = per_response(command_unit, response_unit)
    known = _standard(gains)
    return {
        "standard, minutes": known if isinstance(known, Missing) else in_minutes(known, per),
        "standard, repeats": known if isinstance(known, Missing) else in_repeats(known, per),
        "per sample": per_sample(gains, interval, per),
        "proportional band": known if isinstance(known, Missing) else proportional_band(known, spans),
        "zeros": _zeros(gains, loop_gain_unit(gains.structure, command_unit, response_unit)),
    }


def why_missing(gains: Gains) -> dict[str, str]:
    """Why each of the four forms that `forms_of` gives as None is not there.

    Examples
    --------
    >>> why_missing(Gains("I", integral=2.0))["standard"]
    'there is no proportional part'
    """
    if gains.structure in LEAD_LAG:
        return dict.fromkeys(("parallel", "standard", "series"), f"{gains.structure} is made of zeros and poles")
    found = {"zero-pole": f"{gains.structure} is no lead or lag"}
    if gains.proportional == 0.0:
        return found | dict.fromkeys(("standard", "series"), "there is no proportional part")
    if series(gains) is None:
        found["series"] = "its zeros are complex, or a time would be negative"
    return found


def in_minutes(form: Timed, per: str) -> Form:
    """G, and the times in min."""
    found: Form = {"gain": Quantity(form.gain, per)}
    return found | {name: Quantity(value / _MINUTE, "min") for name, value in _times(form)}


def from_minutes(form: Form, structure: str) -> Gains:
    """Parallel gains of the form in minutes."""
    times = [form[name].value * _MINUTE if name in form else None for name in _TIMES]
    return from_standard(Timed(form["gain"].value, *times), structure)


def in_repeats(form: Timed, per: str) -> Form:
    """G, integral action as repeats of the proportional move in a second and in a minute, derivative times in s."""
    found: Form = {"gain": Quantity(form.gain, per)}
    if form.integral_time is not None:
        found["repeats_per_second"] = Quantity(1.0 / form.integral_time, "1/s")
        found["repeats_per_minute"] = Quantity(_MINUTE / form.integral_time, "1/min")
    return found | {name: Quantity(value, "s") for name, value in _times(form) if name != "integral_time"}


def from_repeats(form: Form, structure: str) -> Gains:
    """Parallel gains of the form in repeats (those per second are read)."""
    repeats = form["repeats_per_second"].value if "repeats_per_second" in form else 0.0
    rest = [form[name].value if name in form else None for name in _TIMES[1:]]
    return from_standard(Timed(form["gain"].value, 1.0 / repeats if repeats else None, *rest), structure)


def per_sample(gains: Gains, interval: float | None, per: str) -> Form | Missing:
    """Proportional, integral * T for a sum of errors, derivative / T for a difference of responses, T in s."""
    if interval is None:
        return Missing("the controller is continuous: it has no samples")
    if gains.structure in LEAD_LAG:
        return Missing(f"{gains.structure} is made of zeros and poles")
    return {
        "proportional": Quantity(gains.proportional, per),
        "integral_per_sample": Quantity(gains.integral * interval, per),
        "derivative_per_sample": Quantity(gains.derivative / interval, per),
        "filter_samples": Quantity(gains.filter_time / interval, "samples"),
        "sample": Quantity(interval, "s"),
    }


def from_per_sample(form: Form, structure: str) -> Gains:
    """Parallel gains of the form per sample."""
    interval = form["sample"].value
    return Gains(
        structure,  # type: ignore[arg-type]
        form["proportional"].value,
        form["integral_per_sample"].value / interval,
        form["derivative_per_sample"].value * interval,
        form["filter_samples"].value * interval,
    )


def proportional_band(form: Timed, spans: Spans) -> Form | Missing:
    """The share of the response's range that moves the command over the whole of its own, and the times in s.

    Band = 100 % (command range / response range)/|G|. The sign of G is the controller's action and stands beside it.
    """
    lost = [name for name, span in (("command", spans.command), ("response", spans.response)) if not span]
    if lost:
        needed = " and ".join(f"[signals] {name} range" for name in lost)
        return Missing(f"the rig file states no {needed}")
    assert spans.command
    assert spans.response
    band = 100.0 * spans.command / (spans.response * abs(form.gain))
    found: Form = {"proportional_band": Quantity(band, "%")}
    return found | {name: Quantity(value, "s") for name, value in _times(form)}


def from_proportional_band(form: Form, spans: Spans, structure: str, *, sign: float = 1.0) -> Gains:
    """Parallel gains of a proportional band; `sign` is that of G."""
    assert spans.command
    assert spans.response
    gain = sign * 100.0 * spans.command / (spans.response * form["proportional_band"].value)
    times = [form[name].value if name in form else None for name in _TIMES]
    return from_standard(Timed(gain, *times), structure)


def from_zeros(form: Form, structure: str) -> Gains:
    """Parallel gains of K and real zeros: K (s + z) ... over s and Tf s + 1."""
    gain = form["loop_gain"].value
    zeros = [form[name].value for name in ("zero", "second_zero") if name in form]
    lag = form["derivative_filter_time"].value if "derivative_filter_time" in form else 0.0
    numerator = gain * np.poly([-z for z in zeros])
    empty = Gains(structure)  # type: ignore[arg-type]
    if structure == "P":
        return replace(empty, proportional=gain)
    if structure == "I":
        return replace(empty, integral=gain)
    if structure == "PI":
        return replace(empty, proportional=gain, integral=float(numerator[1]))
    integral = float(numerator[2]) if structure == "PID" else 0.0
    proportional = float(numerator[1]) - integral * lag
    return replace(
        empty,
        proportional=proportional,
        integral=integral,
        derivative=float(numerator[0]) - proportional * lag,
        filter_time=lag,
    )


def _standard(gains: Gains) -> Timed | Missing:
    if gains.structure in LEAD_LAG:
        return Missing(f"{gains.structure} is made of zeros and poles")
    return standard(gains) or Missing("there is no proportional part")


def _times(form: Timed) -> list[tuple[str, float]]:
    values = (form.integral_time, form.derivative_time, form.filter_time)
    return [(name, value) for name, value in zip(_TIMES, values, strict=True) if value is not None]


def _zeros(gains: Gains, unit: str) -> Form | Missing:
    if gains.structure in LEAD_LAG:
        return Missing("the zero-pole form holds them")
    found: Form = {"loop_gain": Quantity(loop_gain(gains), unit)}
    if gains.filter_time:
        found["derivative_filter_time"] = Quantity(gains.filter_time, "s")
    roots = _real_roots(shape_of(gains).numerator)
    if roots is None:
        return Missing("the zeros are complex")
    return found | {name: Quantity(-r, "1/s") for name, r in zip(("zero", "second_zero"), roots, strict=False)}


def _real_roots(polynomial: tuple[float, ...]) -> list[float] | None:
    """Real roots, largest size last, without loss where they lie far apart; None where they are complex."""
    if len(polynomial) < 3:
        return [] if len(polynomial) == 1 else [-polynomial[1]]
    _, b, c = polynomial
    rest = b * b - 4.0 * c
    if rest < 0.0:
        return None
    larger = -0.5 * (b + math.copysign(math.sqrt(rest), b))
    return [c / larger if larger else 0.0, larger]
