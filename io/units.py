"""Units: the only door to pint, behind a table that refuses what it does not know."""

import functools
import math
import re
import tokenize
import unicodedata
from dataclasses import dataclass
from difflib import get_close_matches
from typing import TYPE_CHECKING, Any

from ..ident.errors import RequestError
from .unit_names import AMBIGUOUS, DEFINITIONS, NAMES, TEMPERATURES

if TYPE_CHECKING:
    import pint

MOST_POWER = 4  # of a unit inside another: s4 at most
MOST_SIGNS = 200  # of a quantity or a unit; a longer one would only keep the parser busy
_QUANTITY = re.compile(r"\s*([+-]?(?:\d+(?:\.\d*)?|\.\d+)(?:[eE][+-]?\d+)?)(?![\d.,])\s*(.*?)\s*", re.DOTALL)
_TOKEN = re.compile(r"\s*(?:(\*\*|\^)|([*·/()])|(-?\d+)|([^\W\d_°%]+0?|[°%][A-Z]{0,2}|deg_[CF]))")


class UnitError(RequestError):
    """A unit that is not known, or of the wrong kind."""


@dataclass(frozen=True)
class Quantity:
    """A number with its unit as written.

    Attributes
    ----------
    value : float
        Finite.
    unit : str
        As written; empty for a bare number.
    """

    value: float
    unit: str


def tidy(text: str) -> str:
    """One spelling for the signs that look alike (micro signs, degree Celsius, minus), spaces trimmed."""
    return unicodedata.normalize("NFKC", text).replace("\N{MINUS SIGN}", "-").replace("\N{DOT OPERATOR}", "·").strip()


def read_quantity(text: str) -> Quantity:
    """Split "20 mm" into its number and its unit; the unit is not yet judged.

    Raises
    ------
    UnitError
        When there is no number at the start, or it is not finite.

    Examples
    --------
    >>> read_quantity("-2.5e1 mm/s")
    Quantity(value=-25.0, unit='mm/s')
    """
    if len(text) > MOST_SIGNS:
        raise UnitError("too long for a number with a unit", found=f'"{text[:40]} ..."', expected='such as "20 mm"')
    match = _QUANTITY.fullmatch(tidy(text))
    if match is None:
        advice = "write the decimal point as '.'" if re.match(r"\s*[+-]?\d+,\d", text) else ""
        raise UnitError("not a number with a unit", found=f'"{text}"', expected='such as "20 mm"', advice=advice)
    value = float(match.group(1))
    if not math.isfinite(value):
        raise UnitError("the number is too large", found=f'"{text}"', expected="a finite number")
    return Quantity(value, match.group(2))


def require_known(unit: str) -> None:
    """Refuse a unit that the table does not know.

    Raises
    ------
    UnitError
        With the nearest names that are known.
    """
    _rule(unit)


def is_known(unit: str) -> bool:
    """Whether the table knows this unit."""
    try:
        _rule(unit)
    except UnitError:
        return False
    return True


def same_kind(unit: str, other: str) -> bool:
    """Whether one can be converted into the other."""
    return bool(_pint(unit).dimensionality == _pint(other).dimensionality)


def difference_factor(unit: str, wanted: str) -> float:
    """Factor from `unit` to `wanted` for a difference, a rate or any pure ratio.

    Raises
    ------
    UnitError
        When a unit is unknown or of another kind.

    Examples
    --------
    >>> difference_factor("cm/s", "mm/ms")
    0.01
    >>> difference_factor("degF", "K") * 9
    5.0
    """
    _require_same_kind(unit, wanted)
    ratio = _pint(unit) / _pint(wanted)
    return _clean(float(ratio.to_base_units().magnitude))


def convert_reading(value: float, unit: str, wanted: str) -> float:
    """A reading (an absolute value: a temperature, a position) from `unit` to `wanted`.

    Raises
    ------
    UnitError
        When a unit is unknown or of another kind.

    Examples
    --------
    >>> round(convert_reading(212.0, "degF", "degC"), 9)
    100.0
    """
    scale, offset = reading_conversion(unit, wanted)
    return scale * value + offset


def reading_conversion(unit: str, wanted: str) -> tuple[float, float]:
    """Scale and offset that turn a reading in `unit` into one in `wanted`."""
    scale = difference_factor(unit, wanted)
    if _temperature(unit) is None or _temperature(unit) == _temperature(wanted):
        return scale, 0.0
    quantity = _registry().Quantity(0.0, _temperature(unit)).to(_temperature(wanted))
    return scale, float(round(quantity.magnitude, 9))


def same_unit(unit: str, other: str) -> bool:
    """Whether both mean the same unit, however they are spelt."""
    if not same_kind(unit, other):
        return False
    scale, offset = reading_conversion(unit, other)
    return math.isclose(scale, 1.0, rel_tol=1e-12) and offset == 0.0


def nearest_units(unit: str) -> list[str]:
    """Known names that look like this one."""
    close = get_close_matches(unit, NAMES, n=3, cutoff=0.5)
    folded = [name for name in NAMES if name.casefold() == unit.casefold()]
    return list(dict.fromkeys(folded + close))[:3]


def _require_same_kind(unit: str, wanted: str) -> None:
    if not same_kind(unit, wanted):
        raise UnitError("wrong kind of unit", found=f'"{unit}"', expected=f'a unit such as "{wanted}"')


def _clean(factor: float) -> float:
    """Take the last bits of a chain of decimal prefixes off: 0.001/1 stays 0.001."""
    short = float(f"{factor:.12g}")
    return short if math.isclose(short, factor, rel_tol=4e-15) else factor


def _temperature(unit: str) -> str | None:
    rule = NAMES.get(tidy(unit))
    return rule if rule in TEMPERATURES else None


@functools.lru_cache(maxsize=512)
def _rule(unit: str) -> str:
    """The unit as an expression of base units.

    Powers may be written m^2, m**2, m2 or m-1; a blank or a dot multiplies.
    """
    text = tidy(unit)
    if text in NAMES:
        return _delta(NAMES[text])
    if len(unit) > MOST_SIGNS:
        raise UnitError("too long for a unit", found=f'"{unit[:40]} ..."', expected='such as "mm/s"')
    if not text:
        raise UnitError("no unit", expected='a unit; "1" for a pure number')
    if text in AMBIGUOUS:
        raise UnitError("this unit has two meanings", found=f'"{unit}"', expected=AMBIGUOUS[text])
    expression: list[str] = []
    position = 0
    while position < len(text):
        match = _TOKEN.match(text, position)
        if match is None:
            raise _unknown(unit, text)
        expression.append(_token_rule(match, expression, unit))
        position = match.end()
    return _balanced(" ".join(expression), unit, text)


def _token_rule(match: re.Match[str], before: list[str], unit: str) -> str:
    power, sign, number, name = match.groups()
    after_value = bool(before) and before[-1].endswith(")")
    if power:
        return "**"
    if sign:
        return ("* (" if after_value else "(") if sign == "(" else sign.replace("·", "*")
    if number:
        if abs(int(number)) > MOST_POWER:
            raise _unknown(unit, unit)
        if before and before[-1] == "**":
            return f"({number})"
        if after_value:
            return f"** ({number})"
        if number != "1":
            raise _unknown(unit, unit)
        return "(1)"
    if name in AMBIGUOUS:
        raise UnitError("this unit has two meanings", found=f'"{unit}"', expected=AMBIGUOUS[name])
    if name not in NAMES:
        raise _unknown(unit, name)
    return ("* " if after_value else "") + f"({_delta(NAMES[name])})"


def _balanced(expression: str, unit: str, text: str) -> str:
    try:
        _registry().parse_expression(expression)
    except (SyntaxError, ValueError, TypeError, IndexError, AssertionError, ArithmeticError) as problem:
        raise _unknown(unit, text) from problem
    except (tokenize.TokenError, _pint_error()) as problem:
        raise _unknown(unit, text) from problem
    return expression


def _unknown(unit: str, part: str) -> UnitError:
    near = nearest_units(part)
    expected = " or ".join([f'"{name}"' for name in near] + ['"1" for a pure number'])
    return UnitError("unknown unit", found=f'"{unit}"', expected=expected)


def _delta(rule: str) -> str:
    """A temperature inside an expression is a difference."""
    return f"delta_{rule}" if rule in {"degree_celsius", "degree_fahrenheit"} else rule


@functools.lru_cache(maxsize=512)
def _pint(unit: str) -> Any:
    """One of this unit, as a quantity of the registry."""
    return 1.0 * _registry().Quantity(1.0) * _registry().parse_expression(_rule(unit))


def _pint_error() -> type[Exception]:
    import pint

    return pint.errors.PintError


@functools.lru_cache(maxsize=1)
def _registry() -> "pint.UnitRegistry[Any]":
    """A registry with our definitions only; built on first use, for its import takes a tenth of a second."""
    import pint

    registry: pint.UnitRegistry[Any] = pint.UnitRegistry(None)
    for definition in DEFINITIONS:
        registry.define(definition)
    return registry
