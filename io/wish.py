"""Wished closed-loop poles as an engineer types them, and the answer as a value."""

import cmath
import math
import re
from dataclasses import dataclass

from ..design.locus.condition import Working
from ..design.locus.nearest import Wished
from ..design.locus.wish import pole_for_peak
from ..ident.errors import RequestError
from .units import UnitError, difference_factor, read_quantity, same_kind, tidy

_NUMBER = r"(?:\d+(?:\.\d*)?|\.\d+)(?:[eE][+-]?\d+)?"
_POINT = re.compile(
    rf"(?P<real>[+-]?\s*{_NUMBER}(?![\d.]*\s*[jJiI]))?\s*(?:(?P<imag>(?:[+-]\s*)?(?:{_NUMBER})?)\s*\*?\s*[jJiI])?(?:\s+(?P<unit>\S.*))?"
)
_DAMPED = re.compile(
    rf"damping(?:\s+ratio)?\s*=?\s*(?P<damping>[+-]?{_NUMBER})\s*[,;]?\s+(?:natural\s+)?frequency\s*=?\s*(?P<frequency>.+)"
)
_PEAK = re.compile(r"overshoot\s*=?\s*(?P<overshoot>[^,;]+?)\s*[,;]?\s+peak(?:\s+time)?\s*=?\s*(?P<peak>.+)")
EXPECTED = (
    'a point in 1/s such as "-3+4j", "damping 0.6, frequency 5 rad/s" or "overshoot 10 %, peak 0.5 s", units included'
)
_MOST = 200  # signs


@dataclass(frozen=True)
class Wish:
    """A wished pole.

    Attributes
    ----------
    text : str
        As typed.
    point : complex, 1/s
        Upper half-plane.
    """

    text: str
    point: complex


@dataclass(frozen=True, eq=False)
class Answer:
    """What the locus of the chosen zeros says to a wish.

    Attributes
    ----------
    wish : Wish
    found : Wished or None
        None where nothing was designed: there is no locus then.
    working : Working or None
        Of |G_L| at the wish; None where its K can't be stated (a pole or zero, or too far away).
    holds, holds_plausible : bool or None
        Whether every requirement holds at the nearest point's K, zeros fixed: on the fitted plant, and on the wished
        share of the plausible plants. None where K is not a number above zero.
    """

    wish: Wish
    found: Wished | None = None
    working: Working | None = None
    holds: bool | None = None
    holds_plausible: bool | None = None


def read_wish(text: str) -> Wish:
    """A wish from what was typed.

    Raises
    ------
    RequestError
        It can't be read, a unit is wrong, or it names no point that a stable or unstable pole could have.

    Examples
    --------
    >>> read_wish("-3+4j").point, read_wish("-180 - 240j 1/min").point
    ((-3+4j), (-3+4j))
    >>> read_wish("damping 0.6, frequency 5 rad/s").point
    (-3+4j)
    """
    plain = tidy(text)
    try:
        point = _point(plain) if len(plain) <= _MOST else None
    except UnitError as problem:
        raise RequestError(
            problem.what, where=f'--wish "{text}"', found=problem.found, expected=problem.expected or EXPECTED
        ) from problem
    if point is None or not cmath.isfinite(point):
        raise RequestError("this wished pole can't be read", where="--wish", found=f'"{text[:80]}"', expected=EXPECTED)
    return Wish(plain, complex(point.real + 0.0, abs(point.imag)))


def _point(text: str) -> complex | None:
    if match := _DAMPED.fullmatch(text):
        return _from_damping(float(match["damping"]), match["frequency"])
    if match := _PEAK.fullmatch(text):
        return _from_peak(match["overshoot"], match["peak"])
    match = _POINT.fullmatch(text)
    if match is None or (match["real"] is None and match["imag"] is None):
        return None
    real, imag = (match[name] if match[name] is None else re.sub(r"\s", "", match[name]) for name in ("real", "imag"))
    if real is not None and imag is not None and imag[:1] not in ("+", "-"):
        return None
    factor = _per_second(match["unit"]) if match["unit"] else 1.0
    whole = 0.0 if imag is None else float(imag + "1" if imag in ("", "+", "-") else imag)
    return factor * complex(float(real or 0.0), whole)


def _per_second(unit: str) -> float:
    """Factor to 1/s; a circular frequency is one, a count per second is not."""
    if "Hz" not in unit:
        for wanted in ("1/s", "rad/s"):
            if same_kind(unit, wanted):
                return difference_factor(unit, wanted)
    raise UnitError("not a unit of a pole", found=f'"{unit}"', expected='"1/s" or another such unit ("rad/s", "1/min")')


def _from_damping(damping: float, frequency: str) -> complex:
    if not -1.0 <= damping <= 1.0:
        raise UnitError("no pole pair has this damping ratio", found=f"{damping:g}", expected="-1 to 1")
    size = read_quantity(frequency)
    if not size.unit or size.value <= 0.0:
        raise UnitError("the frequency must be above zero, with its unit", found=f'"{frequency}"', expected='"5 rad/s"')
    turns = same_kind(size.unit, "Hz") and "Hz" in size.unit
    factor = 2.0 * math.pi * difference_factor(size.unit, "Hz") if turns else _per_second(size.unit)
    return size.value * factor * complex(-damping, math.sqrt(1.0 - damping**2))


def _from_peak(overshoot: str, peak: str) -> complex:
    share, time = read_quantity(overshoot), read_quantity(peak)
    if share.unit not in ("%", "pct", "percent") or not 0.0 < share.value < 100.0:
        raise UnitError("no pole pair has this overshoot", found=f'"{overshoot}"', expected="above 0 %, below 100 %")
    if not time.unit or time.value <= 0.0:
        raise UnitError("the peak time must be above zero, with its unit", found=f'"{peak}"', expected='"0.5 s"')
    seconds = time.value * difference_factor(time.unit, "s")
    return pole_for_peak(0.01 * share.value, seconds)
