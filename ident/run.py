"""One record of a rig as a value: time, command, response and what is known about them."""

from dataclasses import dataclass
from functools import cached_property
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from .law import Law

FloatArray = NDArray[np.float64]
Between = Literal["held", "interpolated", "auto"]
Excitation = Literal["step", "sweep", "random", "frequency-table", "auto"]


@dataclass(frozen=True, eq=False)
class Run:
    """One record, in absolute readings.

    Attributes
    ----------
    label : str
        What people call it, usually the file's name. Never looked at by a computation.
    time : (n,) array, s
        From the record's first sample, strictly increasing.
    command : (n,) array, command unit
        Finite everywhere.
    response : (n,) array, response unit
        NaN where a sample is lost.
    setpoint : (n,) array or None, response unit
    between : {"held", "interpolated", "auto"}
        What the command does between samples.
    command_before : float or None, command unit
        Steady command before the record began; None takes the first logged command.
    excitation : {"step", "sweep", "random", "frequency-table", "auto"}
    closed_loop : bool
    at_rest : bool
        The person says that the rig stood still under `command_before`; else the record has to show it.
    command_late : float, s
        So long after its sample the command moves. Zero where the command itself was logged; a command worked out from
        what the controller saw is late by its computation.
    law : Law or None
        Of a closed loop, where the gains in force are known; without a clamp.
    """

    label: str
    time: FloatArray
    command: FloatArray
    response: FloatArray
    setpoint: FloatArray | None = None
    between: Between = "auto"
    command_before: float | None = None
    excitation: Excitation = "auto"
    closed_loop: bool = False
    at_rest: bool = False
    command_late: float = 0.0
    law: Law | None = None

    @cached_property
    def valid(self) -> NDArray[np.bool_]:
        """(n,) mask of the samples whose response was not lost."""
        return np.isfinite(self.response)

    @property
    def start_command(self) -> float:
        """Steady command before the first sample, command unit."""
        return float(self.command[0]) if self.command_before is None else self.command_before
