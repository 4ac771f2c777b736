"""A gain that is not the same everywhere: a bent static curve between the command and the plant.

    x = u + b (u - r)^2,   slope 1 + 2 b (u - r)

x is what drives the plant, r the operating command, where the slope is one. Valves, heaters and pumps are seldom
straight; what a straight plant leaves of it looks like a wandering level, and spoils both the noise and the intervals.

References
----------
A static curve before linear dynamics is a Hammerstein model: Ljung, System Identification (from memory). That curves of
actuators bend: common practice, no source.
"""

from dataclasses import dataclass, replace

import numpy as np

from .run import FloatArray, Run

FLATTEST = 1.0 / 3.0


@dataclass(frozen=True)
class Bend:
    """The curve, as the records show it.

    Attributes
    ----------
    reference : float, command unit
        r.
    bend : float, per command unit
        b.
    error : float, per command unit
        Standard error of b.
    reach : float, command unit
        Largest distance from r that the records cover.
    sureness : float
        Rise of twice the log likelihood over a straight plant.
    """

    reference: float
    bend: float
    error: float
    reach: float
    sureness: float

    def through(self, run: Run) -> Run:
        """The run with the command that drives the plant behind the curve."""
        return bent(run, self.reference, self.bend)


def slope_at(bend: FloatArray, distance: FloatArray) -> FloatArray:
    """Gain at a distance from the reference over that at the reference, for curves of these bends.

    Past the place where it has fallen to a third it stays there: no record of a curve that still rises tells of a turn.
    """
    return np.asarray(np.maximum(1.0 + 2.0 * bend * distance, FLATTEST))


def curved(bend: FloatArray, move: FloatArray) -> FloatArray:
    """What drives the plant after a move of the command from the reference, straight on from where the slope has fallen
    to a third.

    Examples
    --------
    >>> curved(np.array([0.1, -0.1]), np.array([2.0, 2.0])).round(6).tolist()
    [2.4, 1.6]
    """
    with np.errstate(divide="ignore"):
        last = (FLATTEST - 1.0) / (2.0 * bend)  # of no bend: as far away as can be
    held = np.where(bend > 0.0, np.maximum(move, last), np.where(bend < 0.0, np.minimum(move, last), move))
    return np.asarray(held + bend * held * held + FLATTEST * (move - held))


def bent(run: Run, reference: float, bend: float) -> Run:
    """The run with its command through the curve.

    Examples
    --------
    >>> run = Run("run", np.arange(3.0), np.array([0.0, 1.0, 2.0]), np.zeros(3))
    >>> bent(run, 0.0, 0.1).command.tolist()
    [0.0, 1.1, 2.4]
    """
    if bend == 0.0:
        return run
    both = reference + curved(np.array(bend), np.append(run.command, run.start_command) - reference)
    return replace(run, command=both[:-1], command_before=float(both[-1]))
