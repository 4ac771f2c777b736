"""Gains in parallel form, the one that every computation uses; other forms are only printed."""

from dataclasses import dataclass

from .requirements import StructureName


@dataclass(frozen=True)
class Gains:
    """proportional + integral/s on the error, derivative s/(filter_time s + 1) on minus the response.

    Signs included: a plant of negative gain has negative gains here.

    Attributes
    ----------
    structure : StructureName
    proportional : float, command unit per response unit
    integral : float, the same per s
    derivative : float, the same times s
    filter_time : float, s
        Of the derivative; 0 where there is none.
    setpoint_weight : float
        The proportional part sees setpoint_weight * setpoint - response.
    zero, pole : float or None, 1/s
        lead, lag and lead-lag only: proportional * (s + zero)/(s + pole) on the error.
    second_zero, second_pole : float or None, 1/s
        lead-lag only: (s + second_zero)/(s + second_pole) in series, the lag; the first ones are then the lead's.
    """

    structure: StructureName
    proportional: float = 0.0
    integral: float = 0.0
    derivative: float = 0.0
    filter_time: float = 0.0
    setpoint_weight: float = 1.0
    zero: float | None = None
    pole: float | None = None
    second_zero: float | None = None
    second_pole: float | None = None
