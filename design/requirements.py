"""What the person asks for, as values: requirements, limits, and the controller's fixed properties."""

from dataclasses import dataclass
from typing import Literal

RequirementName = Literal[
    "overshoot",
    "settling_time",
    "rise_time",
    "steady_state_error",
    "ramp_error",
    "disturbance_peak",
    "disturbance_recovery",
    "command_noise",
    "damping_ratio",
    "gain_margin",
    "phase_margin",
    "peak_sensitivity",
]
StructureName = Literal["P", "I", "PI", "PD", "PID", "lead", "lag", "lead-lag"]


@dataclass(frozen=True)
class Requirement:
    """One bound. Everything is in base units: s, response unit, command unit, dB, deg, fractions for per cent.

    Attributes
    ----------
    name : RequirementName
    limit : float
        overshoot: a fraction of the step; times in s; errors and peaks in response unit; margins in dB and deg.
    sense : {"at_most", "at_least"}
    unit : str
        As the person wrote it, for display ("%", "s", "mm", "dB", "deg", "").
    scale : float
        limit * scale is the number in `unit` for display (100 for "%", 1000 for "ms").
    band : float or None
        settling_time: fraction of |final - start|; disturbance_recovery: response unit.
    command_step : float or None, command unit
    ramp : float or None, response unit per s
    """

    name: RequirementName
    limit: float
    sense: Literal["at_most", "at_least"]
    unit: str = ""
    scale: float = 1.0
    band: float | None = None
    command_step: float | None = None
    ramp: float | None = None


@dataclass(frozen=True)
class Requirements:
    """All that is asked for.

    Attributes
    ----------
    items : tuple of Requirement
    test_step : float or None, response unit, sign included
    step_start : float or None, response unit, absolute
        None: the operating point.
    both_directions : bool
    confidence : float
        Share of the plausible plants that must meet all of them together.
    """

    items: tuple[Requirement, ...] = ()
    test_step: float | None = None
    step_start: float | None = None
    both_directions: bool = False
    confidence: float = 0.95

    def find(self, name: RequirementName) -> Requirement | None:
        """The requirement of that name, if it was stated."""
        return next((item for item in self.items if item.name == name), None)


@dataclass(frozen=True)
class Limits:
    """Bounds of the hardware, absolute readings. None was not given; +-inf is said to be not limited.

    Attributes
    ----------
    command_lowest, command_highest : float or None, command unit
    command_rate : float or None, command unit per s
    response_lowest, response_highest : float or None, response unit
    response_rate : float or None, response unit per s
    """

    command_lowest: float | None = None
    command_highest: float | None = None
    command_rate: float | None = None
    response_lowest: float | None = None
    response_highest: float | None = None
    response_rate: float | None = None


@dataclass(frozen=True)
class ControllerSetting:
    """What is fixed about the controller.

    Attributes
    ----------
    update_interval : float, s
        Of a continuous controller: that of the fine law that stands in for it in time; 0 lets the tool choose.
    computation_delay : float, s
        From sampling the response to moving the command.
    structures : tuple of StructureName or None
        Allowed ones; None lets the tool choose.
    response_filter_time : float, s
        First-order filter that the controller sees and the log doesn't.
    continuous : bool
        No sampling: no hold and no computation delay.
    """

    update_interval: float
    computation_delay: float = 0.0
    structures: tuple[StructureName, ...] | None = None
    response_filter_time: float = 0.0
    continuous: bool = False
