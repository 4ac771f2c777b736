"""Everything that stays the same while gains are judged: operating point, noise, what is asked, what limits."""

from dataclasses import dataclass, replace

import numpy as np

from ..ident.fitted import Noise
from ..ident.law import Clamp
from .requirements import ControllerSetting, Limits, Requirement, RequirementName, Requirements

_FLOORS = (
    Requirement("gain_margin", 6.0, "at_least", "dB"),
    Requirement("phase_margin", 30.0, "at_least", "deg"),
    Requirement("peak_sensitivity", 2.0, "at_most"),
)
MARGINS: tuple[RequirementName, ...] = ("gain_margin", "phase_margin", "peak_sensitivity")
STEP: tuple[RequirementName, ...] = ("overshoot", "settling_time", "rise_time", "steady_state_error")
DISTURBED: tuple[RequirementName, ...] = ("disturbance_peak", "disturbance_recovery")


@dataclass(frozen=True)
class Situation:
    """What gains are judged against.

    Attributes
    ----------
    operating_command, operating_response : float
        Absolute; deviations start from here.
    noise : Noise or None
    requirements : Requirements
    limits : Limits
    setting : ControllerSetting
    floors : tuple of Requirement
        Margins that hold although nobody asked: gain margin 6 dB, phase margin 30 deg, peak sensitivity 2 (common
        practice, no source); empty where a margin is asked for.
    """

    operating_command: float
    operating_response: float
    noise: Noise | None
    requirements: Requirements
    limits: Limits
    setting: ControllerSetting
    floors: tuple[Requirement, ...] = ()

    @property
    def items(self) -> tuple[Requirement, ...]:
        """What is judged: the stated requirements, then the floors."""
        return self.requirements.items + self.floors

    @property
    def step(self) -> float:
        """Setpoint step, response unit; 0 where there is none."""
        return self.requirements.test_step or 0.0

    @property
    def start(self) -> float:
        """Setpoint before the step as a deviation, response unit."""
        start = self.requirements.step_start
        return 0.0 if start is None else start - self.operating_response

    @property
    def clamp(self) -> Clamp:
        """The clamp that is shipped, in deviations from the operating command."""
        return Clamp(
            _deviation(self.limits.command_lowest, self.operating_command),
            _deviation(self.limits.command_highest, self.operating_command),
            _finite(self.limits.command_rate),
        )

    @property
    def disturbance(self) -> float:
        """Command step of the disturbance requirements; the larger when two are stated; 0 where there is none."""
        steps = [item.command_step for item in self.requirements.items if item.command_step is not None]
        return max(steps, key=abs, default=0.0)

    def without_floors(self) -> "Situation":
        """The stated requirements only."""
        return replace(self, floors=())

    def without(self, name: RequirementName) -> "Situation":
        """The same without one requirement."""
        items = tuple(item for item in self.requirements.items if item.name != name)
        return replace(self, requirements=replace(self.requirements, items=items))

    def asks(self, names: tuple[RequirementName, ...]) -> bool:
        """Whether one of these is judged."""
        return any(item.name in names for item in self.items)


def situation_of(
    *,
    operating_command: float,
    operating_response: float,
    noise: Noise | None,
    requirements: Requirements,
    limits: Limits,
    setting: ControllerSetting,
) -> Situation:
    """Gather the keywords, and add the floors where no margin is asked for."""
    asked = any(item.name in MARGINS for item in requirements.items)
    floors = () if asked else _FLOORS
    return Situation(operating_command, operating_response, noise, requirements, limits, setting, floors)


def _deviation(limit: float | None, origin: float) -> float | None:
    bounded = _finite(limit)
    return None if bounded is None else bounded - origin


def _finite(limit: float | None) -> float | None:
    return limit if limit is not None and np.isfinite(limit) else None
