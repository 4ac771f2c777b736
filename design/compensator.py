"""The compensator in s: its shape with leading coefficient one, and the loop gain K that multiplies it."""

from dataclasses import dataclass, replace

from ..ident.plant import Plant
from .gains import Gains
from .locus.loop import OpenLoop
from .requirements import ControllerSetting


@dataclass(frozen=True)
class Shape:
    """numerator(s)/denominator(s), highest power first, both with leading coefficient one where the contract says so.

    PI: (s+z)/s. PD: (s+z)/(Tf s+1). PID: (s^2+bs+c)/(s(Tf s+1)). lead, lag: (s+z)/(s+p); lead-lag: two of them. P: 1.
    I: 1/s.
    """

    numerator: tuple[float, ...]
    denominator: tuple[float, ...]


def loop_gain(gains: Gains) -> float:
    """K with its sign: P, I, or D + P Tf, as the structure has it.

    Examples
    --------
    >>> loop_gain(Gains("PID", 2.0, 1.0, 0.5, 0.1))
    0.7
    """
    if gains.structure == "I":
        return gains.integral
    if gains.structure in ("PD", "PID"):
        return gains.derivative + gains.proportional * gains.filter_time
    return gains.proportional


def shape_of(gains: Gains) -> Shape:
    """The compensator divided by its K: zeros and poles only."""
    gain = loop_gain(gains)
    lag = gains.filter_time
    if gains.structure == "P":
        return Shape((1.0,), (1.0,))
    if gains.structure == "I":
        return Shape((1.0,), (1.0, 0.0))
    if gains.structure == "PI":
        return Shape((1.0, gains.integral / gain), (1.0, 0.0))
    if gains.structure == "PD":
        return Shape((1.0, gains.proportional / gain), (lag, 1.0) if lag else (1.0,))
    if gains.structure == "PID":
        middle = (gains.proportional + gains.integral * lag) / gain
        bottom = (lag, 1.0, 0.0) if lag else (1.0, 0.0)
        return Shape((1.0, middle, gains.integral / gain), bottom)
    top: tuple[float, ...] = (1.0, float(gains.zero or 0.0))
    below: tuple[float, ...] = (1.0, float(gains.pole or 0.0))
    if gains.structure == "lead-lag":
        top = _times(top, (1.0, float(gains.second_zero or 0.0)))
        below = _times(below, (1.0, float(gains.second_pole or 0.0)))
    return Shape(top, below)


def with_loop_gain(gains: Gains, wanted: float) -> Gains:
    """The same zeros with another K of the same sign convention."""
    factor = wanted / loop_gain(gains)
    return replace(
        gains,
        proportional=gains.proportional * factor,
        integral=gains.integral * factor,
        derivative=gains.derivative * factor,
    )


def loop_gain_unit(structure: str, command_unit: str, response_unit: str) -> str:
    """Unit of K as text."""
    per = per_response(command_unit, response_unit)
    if structure == "I":
        return over_second(command_unit, response_unit)
    return times_second(per) if structure in ("PD", "PID") else per


def per_response(command_unit: str, response_unit: str) -> str:
    """ "V/mm"; a compound unit stands in brackets, a pure number is "1"."""
    top = _bracketed(command_unit) or "1"
    below = _bracketed(response_unit)
    return f"{top}/{below}" if below else top


def over_second(command_unit: str, response_unit: str) -> str:
    """ "V/(mm s)"."""
    top = _bracketed(command_unit) or "1"
    below = _bracketed(response_unit)
    return f"{top}/({below} s)" if below else f"{top}/s"


def times_second(per: str) -> str:
    """ "V s/mm" from "V/mm"."""
    top, slash, below = per.partition("/") if not per.startswith("(") else (per, "", "")
    if per == "1":
        return "s"
    if top == "1" and slash:
        return f"s/{below}"
    return f"{top} s{slash}{below}"


def open_loop(gains: Gains, plant: Plant, setting: ControllerSetting) -> OpenLoop:
    """G_L(s) of the contract: shape * plant * dead time * hold, the sign of the gains included, K left out."""
    shape = shape_of(gains)
    sign = 1.0 if loop_gain(gains) > 0 else -1.0
    top = _times(tuple(sign * x for x in shape.numerator), plant.numerator)
    bottom = _times(shape.denominator, plant.denominator)
    if setting.response_filter_time > 0.0:
        bottom = _times(bottom, (setting.response_filter_time, 1.0))
    if setting.continuous:
        return OpenLoop(top, bottom, plant.dead_time)
    return OpenLoop(top, bottom, plant.dead_time + setting.computation_delay, setting.update_interval)


def _bracketed(unit: str) -> str:
    if unit in ("", "1"):
        return ""
    plain = all(mark not in unit for mark in "/* ")
    return unit if plain else f"({unit})"


def _times(a: tuple[float, ...], b: tuple[float, ...]) -> tuple[float, ...]:
    out = [0.0] * (len(a) + len(b) - 1)
    for i, x in enumerate(a):
        for j, y in enumerate(b):
            out[i + j] += x * y
    return tuple(out)
