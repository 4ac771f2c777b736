"""A controller that runs the difference equation of a gain sheet, and nothing else of it.

In deviations from the sheet's operating point, with v the wanted and u the sent command::

    v[k] = sum_i setpoint[i] r[k-i] - sum_i response[i] y[k-i]
           + sum_{i>=1} (memory[i] - command[i]) u[k-i] - sum_{i>=1} memory[i] v[k-i]
    u[k] = v[k] limited in level and in rate
"""

from collections import deque
from dataclasses import dataclass
from typing import Any


@dataclass(frozen=True)
class Equation:
    """The coefficients, present sample first, and the clamp in deviations."""

    interval: float
    command: tuple[float, ...]
    setpoint: tuple[float, ...]
    response: tuple[float, ...]
    memory: tuple[float, ...]
    lowest: float = -float("inf")
    highest: float = float("inf")
    rate: float = float("inf")


class SheetController:
    """The law in use: absolute readings in, absolute command out.

    Parameters
    ----------
    equation : Equation
    operating_command, operating_response : float
    """

    def __init__(self, equation: Equation, operating_command: float, operating_response: float) -> None:
        self.equation = equation
        self.operating_command, self.operating_response = operating_command, operating_response
        self._back = [m - c for m, c in zip(_padded(equation, "memory"), _padded(equation, "command"), strict=True)][1:]
        self._own = _padded(equation, "memory")[1:]
        self._r = deque([0.0] * len(equation.setpoint), len(equation.setpoint))
        self._y = deque([0.0] * len(equation.response), len(equation.response))
        self._u = deque([0.0] * len(self._back), len(self._back))
        self._v = deque([0.0] * len(self._own), len(self._own))
        self._last = 0.0

    @classmethod
    def from_sheet(cls, sheet: dict[str, Any]) -> "SheetController":
        """The controller of a released sheet, or the candidate of a held one."""
        part = sheet["controller"] or sheet["candidate"]["controller"]
        law = part["difference_equation"]
        clamp = law.get("clamp") or {}
        equation = Equation(
            interval=law["update_interval"],
            command=tuple(law["command"]),
            setpoint=tuple(law["setpoint"]),
            response=tuple(law["response"]),
            memory=tuple(law["memory"]),
            lowest=_number(clamp.get("lowest"), -float("inf")),
            highest=_number(clamp.get("highest"), float("inf")),
            rate=_number(clamp.get("rate"), float("inf")),
        )
        point = sheet["operating_point"]
        return cls(equation, point["command"]["value"], point["response"]["value"])

    def update(self, setpoint: float, response: float) -> float:
        """One update: the command to send, from the absolute setpoint and reading."""
        law = self.equation
        self._r.appendleft(setpoint - self.operating_response)
        self._y.appendleft(response - self.operating_response)
        v = sum(a * b for a, b in zip(law.setpoint, self._r, strict=True))
        v -= sum(a * b for a, b in zip(law.response, self._y, strict=True))
        v += sum(a * b for a, b in zip(self._back, self._u, strict=True))
        v -= sum(a * b for a, b in zip(self._own, self._v, strict=True))
        swing = law.rate * law.interval
        u = min(max(v, law.lowest, self._last - swing), law.highest, self._last + swing)
        self._u.appendleft(u)
        self._v.appendleft(v)
        self._last = u
        return u + self.operating_command


def _padded(equation: Equation, name: str) -> list[float]:
    longest = max(len(equation.command), len(equation.memory))
    own = list(getattr(equation, name))
    return own + [0.0] * (longest - len(own))


def _number(value: float | None, otherwise: float) -> float:
    return otherwise if value is None else float(value)
