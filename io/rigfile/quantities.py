"""Texts with units into numbers, noting under its key what is refused."""

import math
from collections.abc import Callable

from .. import units
from ..units import UnitError, read_quantity
from .messages import Problems

NOT_LIMITED = "not limited"


class Quantities:
    """Converts the quantities of one rig file.

    Parameters
    ----------
    problems : Problems
        Where refusals go; the returned number is then NaN.
    """

    def __init__(self, problems: Problems) -> None:
        self._problems = problems

    def difference(self, key: str, text: str, unit: str, *, least: float = -math.inf) -> float:
        """A difference, step, error, band or rate, in `unit`; "degC" is a difference here."""
        return self._checked(key, text, lambda: _difference(text, unit), least)

    def positive(self, key: str, text: str, unit: str) -> float:
        """A difference above zero, in `unit`."""
        value = self.difference(key, text, unit)
        if value <= 0.0:
            self._problems.add(key, "must be above zero", f'"{text}"', "a value above zero")
        return value

    def reading(self, key: str, text: str, unit: str) -> float:
        """An absolute reading, in `unit`; "degC" is a temperature here."""
        return self._checked(key, text, lambda: _reading(text, unit), -math.inf)

    def limit(self, key: str, text: str, unit: str, unlimited: float) -> float:
        """An absolute reading, or `unlimited` for "not limited"."""
        return unlimited if text.strip() == NOT_LIMITED else self.reading(key, text, unit)

    def rate_limit(self, key: str, text: str, unit: str) -> float:
        """A rate above zero, or infinity for "not limited"."""
        return math.inf if text.strip() == NOT_LIMITED else self.positive(key, text, unit)

    def fraction(self, key: str, text: str, *, most: float = math.inf) -> float:
        """Per cent as a fraction, not below zero."""
        value = self._checked(key, text, lambda: _fraction(text), 0.0)
        if value > most:
            self._problems.add(key, "too large", f'"{text}"', f"at most {100.0 * most:g} %")
        return value

    def _checked(self, key: str, text: str, compute: Callable[[], float], least: float) -> float:
        value = self._problems.attempt(key, compute, math.nan)
        if value < least:
            self._problems.add(key, "too small", f'"{text}"', "zero or more" if least == 0.0 else f"at least {least:g}")
        return value


def display(text: str, unit: str) -> tuple[str, float]:
    """The unit as the person wrote it, and the factor that shows a number of `unit` in it."""
    written = read_quantity(text).unit
    return written, units.difference_factor(unit, written)


def is_percent(text: str) -> bool:
    """Whether a quantity is written in per cent."""
    return read_quantity(text).unit in {"%", "pct", "percent"}


def _difference(text: str, unit: str) -> float:
    quantity = _with_unit(text, unit)
    return quantity.value * units.difference_factor(quantity.unit, unit)


def _reading(text: str, unit: str) -> float:
    quantity = _with_unit(text, unit)
    return units.convert_reading(quantity.value, quantity.unit, unit)


def _with_unit(text: str, unit: str) -> units.Quantity:
    quantity = read_quantity(text)
    if quantity.unit:
        return quantity
    if units.same_unit(unit, "1"):
        return units.Quantity(quantity.value, unit)
    raise UnitError("the unit is missing", found=f'"{text}"', expected=f'"{text.strip()} {unit}", or another such unit')


def _fraction(text: str) -> float:
    if not is_percent(text):
        raise UnitError("this must be in per cent", found=f'"{text}"', expected='such as "10 %"')
    return read_quantity(text).value / 100.0
