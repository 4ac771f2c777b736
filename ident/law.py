"""The control law as a value: the difference equation that a controller runs, with its clamp and memory."""

from dataclasses import dataclass


@dataclass(frozen=True)
class Clamp:
    """Bounds on the command in deviations from the operating point; None is unbounded.

    Attributes
    ----------
    lowest, highest : float or None, command unit
    rate : float or None, command unit per second
    """

    lowest: float | None = None
    highest: float | None = None
    rate: float | None = None


@dataclass(frozen=True)
class Law:
    """The sampled law, in deviations from the operating point.

    With v the wanted and u the sent command, r the setpoint and y the response::

        v[k] = sum_i setpoint[i] r[k-i] - sum_i response[i] y[k-i]
               + sum_{i>=1} (memory[i] - command[i]) u[k-i] - sum_{i>=1} memory[i] v[k-i]
        u[k] = v[k] limited by the clamp, in level and in rate

    Attributes
    ----------
    update_interval : float, s
    command, setpoint, response, memory : tuple of float
        Coefficients of the present sample first; command[0] and memory[0] are one.
    clamp : Clamp
    """

    update_interval: float
    command: tuple[float, ...]
    setpoint: tuple[float, ...]
    response: tuple[float, ...]
    memory: tuple[float, ...]
    clamp: Clamp = Clamp()
