"""What a ladder is: a first move with the loop open, then controllers of rising gain, each with what to expect."""

from dataclasses import dataclass

from ...ident.law import Law
from ...ident.run import FloatArray
from ..gains import Gains

LARGEST_STEP = 1.5  # in gain, from one rung to the next
RESPONSE_TIMES = 3.0  # outside the band, or frozen, for so many: stop
SWINGS = 3  # so many swings, each larger than the one before: stop


@dataclass(frozen=True)
class Spread:
    """One number of a prediction: on the fitted plant, and between which 95 % of the plausible plants lie.

    None: never (does not settle, does not rise).
    """

    predicted: float | None
    low: float | None
    high: float | None


@dataclass(frozen=True, eq=False)
class Band:
    """Where 99.9 % of what may be measured lies, plants and noise together.

    Attributes
    ----------
    time : (n,) array, s
    response, low, high : (n,) arrays, response unit, absolute
        response: of the fitted plant.
    """

    time: FloatArray
    response: FloatArray
    low: FloatArray
    high: FloatArray


@dataclass(frozen=True, eq=False)
class FirstMove:
    """Rung 0: the loop is open, the command moves once and goes back.

    Attributes
    ----------
    command_from, command_to : float, command unit, absolute
    response_from : float, response unit, absolute
    moves : Spread, response unit
        How far the response has moved after `within`, sign included.
    at_least : float, response unit
        Less than this, or the other way, means wiring, sign or unit is wrong.
    within : float, s
    band : Band
    visible : bool
        Whether the move stands out of the noise.
    """

    command_from: float
    command_to: float
    response_from: float
    moves: Spread
    at_least: float
    within: float
    band: Band
    visible: bool

    @property
    def up(self) -> bool:
        """The way the response must go."""
        return (self.moves.predicted or 0.0) > 0.0


@dataclass(frozen=True, eq=False)
class Expected:
    """What a rung's setpoint step should look like.

    Attributes
    ----------
    setpoint_from, setpoint_to : float, response unit, absolute
    peak, final : Spread, response unit, absolute
        peak: the reading farthest in the direction of the step.
    overshoot : Spread, a fraction
    rise_time, settling_time : Spread, s
        From 10 % to 90 %, and into 2 %.
    command : Spread, command unit, absolute
        The reading farthest from the one at rest.
    response_time : float, s
        The unit of patience of the abort criteria: the rise time, or a fifth of what was watched.
    band : Band
    """

    setpoint_from: float
    setpoint_to: float
    peak: Spread
    final: Spread
    overshoot: Spread
    rise_time: Spread
    settling_time: Spread
    command: Spread
    response_time: float
    band: Band


@dataclass(frozen=True, eq=False)
class Rung:
    """One controller of the ladder.

    Attributes
    ----------
    number : int
        From 1.
    gains : Gains
    law : Law
    share : float
        Of the target's gain.
    gain_margin, phase_margin : float, dB and deg
        Lowest over the plants checked.
    sensitivity : float
        Highest peak over them.
    damping : float
        Lowest damping ratio over the plants that chose the rung, 1 where nothing swings.
    plants_checked : int
    expected : Expected or None
        None without a test step.
    """

    number: int
    gains: Gains
    law: Law
    share: float
    gain_margin: float
    phase_margin: float
    sensitivity: float
    damping: float
    plants_checked: int
    expected: Expected | None


@dataclass(frozen=True, eq=False)
class Ladder:
    """The whole ladder.

    Attributes
    ----------
    first_move : FirstMove or None
    rungs : tuple of Rung
        The last is the target; empty where there is no ladder.
    refusal : str
        Why there is none, in capitals; empty where there is one.
    less_is_unsafe : bool
        There is none because less gain is not safer; such gains are held.
    cautions : tuple of str
    noise_std : float, response unit
    started_from : {"nothing", "old gains"}
    """

    first_move: FirstMove | None
    rungs: tuple[Rung, ...]
    refusal: str = ""
    less_is_unsafe: bool = False
    cautions: tuple[str, ...] = ()
    noise_std: float = 0.0
    started_from: str = "nothing"
