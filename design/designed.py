"""What design hands on: the gains, how they were picked, and what they do on every plausible plant."""

from dataclasses import dataclass

from ..ident.law import Law
from ..ident.run import FloatArray
from .gains import Gains
from .requirements import Requirement

GainInterval = tuple[float | None, float | None]


@dataclass(frozen=True)
class Judged:
    """One requirement as predicted, in base units (see Requirement).

    Attributes
    ----------
    requirement : Requirement
    predicted : float or None
        On the fitted plant; None: never (does not settle, does not rise).
    low, high : float or None
        95 % of the plausible plants lie between; None: never.
    met : bool
        On the share `confidence` of the plausible plants, taken by itself.
    floor : bool
        True when nobody asked for it and it is one of the floors that always hold.
    """

    requirement: Requirement
    predicted: float | None
    low: float | None
    high: float | None
    met: bool
    floor: bool = False


@dataclass(frozen=True)
class LimitJudged:
    """One hardware limit against the worst plausible plant.

    Attributes
    ----------
    name : str
        "command lowest", "command highest", "command rate", "response lowest", "response highest", "response rate".
    limit, predicted_worst : float, in `unit`; absolute readings, rates as magnitudes
    headroom : float, in `unit`; negative when it is passed
    """

    name: str
    limit: float
    predicted_worst: float
    unit: str
    headroom: float
    met: bool


@dataclass(frozen=True, eq=False)
class Trajectory:
    """A predicted response to the test step with its band.

    Attributes
    ----------
    time : (n,) array, s, from the controller sample that first sees the setpoint
    setpoint : (n,) array, response unit, absolute
    response, response_low, response_high : (n,) arrays, response unit, absolute
        Of the fitted plant; the band holds 95 % of the plausible plants at each time.
    command, command_low, command_high : (n,) arrays, command unit, absolute
    """

    time: FloatArray
    setpoint: FloatArray
    response: FloatArray
    response_low: FloatArray
    response_high: FloatArray
    command: FloatArray
    command_low: FloatArray
    command_high: FloatArray


@dataclass(frozen=True)
class Selection:
    """The point of the locus that was chosen, and the gain of the magnitude condition there.

    Attributes
    ----------
    loop_gain : float
        K = 1/|G_L(pole)|, after rounding; positive.
    loop_gain_unit : str
    pole : complex, 1/s
    angle_residual_deg : float
    sampled_pole : complex, 1/s
        The exact sampled pole beside it, ln z / T.
    intervals, intervals_plausible : tuple of (low, high)
        Every K at which all requirements hold, zeros fixed; None is unbounded.
    rows : tuple of (requirement name, tuple of (low, high))
        The same for each requirement by itself, fitted plant: the rows of the gain ribbon.
    """

    loop_gain: float
    loop_gain_unit: str
    pole: complex
    angle_residual_deg: float
    sampled_pole: complex
    intervals: tuple[GainInterval, ...]
    intervals_plausible: tuple[GainInterval, ...]
    rows: tuple[tuple[str, tuple[GainInterval, ...]], ...]


@dataclass(frozen=True)
class Tried:
    """One structure that the search tried.

    Attributes
    ----------
    structure : str
    slack : float
        Smallest normalised slack reached at the wished share of plants; negative: some requirement fails.
    share : float
        Of the plausible plants that meet everything.
    worst : str
        The requirement that binds.
    """

    structure: str
    slack: float
    share: float
    worst: str


@dataclass(frozen=True, eq=False)
class Design:
    """The whole answer of the design stage.

    Attributes
    ----------
    gains : Gains
        As printed: rounded, and checked as rounded.
    law : Law
        Of a continuous controller: the fine one that stood in for it in time; nothing to be loaded.
    selection : Selection
    judged : tuple of Judged
    limits : tuple of LimitJudged
    share_meeting : float
        Of the checked plausible plants, those that meet everything together.
    plants_checked : int
    all_stable, limits_kept : bool
        On every checked plant.
    clamped_share, clamped_duration : float
        Share of plants whose command is limited during the test step, and the longest time in s.
    trajectory : Trajectory or None
    tried : tuple of Tried
    reasons : tuple of str
        Why these gains can't be released, in words an engineer can act on; empty when they can.
    cautions : tuple of str
    continuous : bool
        The controller is not sampled.
    """

    gains: Gains
    law: Law
    selection: Selection
    judged: tuple[Judged, ...]
    limits: tuple[LimitJudged, ...]
    share_meeting: float
    plants_checked: int
    all_stable: bool
    limits_kept: bool
    clamped_share: float
    clamped_duration: float
    trajectory: Trajectory | None
    tried: tuple[Tried, ...]
    reasons: tuple[str, ...]
    cautions: tuple[str, ...] = ()
    continuous: bool = False
