"""A sticking valve between command and plant: it holds still until the command is a band away, then jumps after it.

With z where the valve stands and u the command, z stays while |u - z| <= band; past it, z = u - short sign(u - z).
short = band is a play (backlash): no jump, the valve drags behind the command by the band. The band is half of what the
command must turn back before a play follows.

References
----------
Choudhury, Thornhill and Shah, Control Eng. Pract. 13 (2005) 641-658: a valve's stick band and slip jump (from memory).
"""

from dataclasses import dataclass, replace

import numpy as np

from .run import FloatArray, Run

# How far short of the command a valve comes to rest, as a share of the band that holds it: sliding friction is seldom
# under a fifth of the static one (common practice, no source).
LEAST_SHARE = 0.2

# Step of a sequence that fills the unit interval evenly however many of its members are taken: the golden ratio.
_TURN = 0.6180339887498949


@dataclass(frozen=True)
class Valve:
    """What holds the valve.

    Attributes
    ----------
    band : float, command unit
        Half width of the stretch within which the command moves nothing; 0: the valve follows.
    short : float, command unit
        How far short of the command it comes to rest after a move; at most the band.
    """

    band: float = 0.0
    short: float = 0.0

    def through(self, run: Run) -> Run:
        """The run with the command that gets through to the plant; the valve starts where the command stood."""
        if self.band <= 0.0:
            return run
        moved = through_valve(run.command, run.start_command, self.band, self.short)
        return replace(run, command=moved, command_before=run.start_command)


@dataclass(frozen=True, eq=False)
class Sticking:
    """A valve that sticks, as far as the records show it.

    Attributes
    ----------
    valve : Valve
        The likeliest.
    short_error : float, command unit
        Standard error of how far short of the command it rests.
    shorts : (k,) array, command unit
        Likeliest short at each share.
    shares : (k,) array
        short / band that were weighed, evenly spread.
    weights : (k,) array
        How likely each is; they sum to one. Large moves alone leave them equal.
    sureness : float
        Rise of twice the log likelihood over a plant without a valve.
    chance : float
        Share of the plausible plants that stand behind such a valve: below one, a plant without it, whose level drifts,
        explains the records too.
    """

    valve: Valve
    short_error: float
    shorts: FloatArray
    shares: FloatArray
    weights: FloatArray
    sureness: float
    chance: float = 1.0

    @property
    def sure(self) -> bool:
        """Whether the records need the valve."""
        return self.chance >= 1.0

    def draws(self, count: int, seed: int) -> FloatArray:
        """(count, 3) valves: band, short, and how far above the valve the command stands at rest, command unit.

        Rows of zeros where none stands.
        """
        generator = np.random.default_rng(seed)
        rows = generator.choice(len(self.shares), count, p=self.weights)
        width = (1.0 - LEAST_SHARE) / len(self.shares)
        share = self.shares[rows] + width * generator.uniform(-0.5, 0.5, count)
        short = np.abs(self.shorts[rows] + self.short_error * generator.standard_normal(count))
        band = short / share
        valves = np.column_stack([band, short, band * generator.uniform(-1.0, 1.0, count)])
        there = (np.arange(count) * _TURN) % 1.0 < self.chance
        return np.asarray(valves * there[:, None])


def through_valve(command: FloatArray, start: float, band: float, short: float) -> FloatArray:
    """What gets through, (n,), of a command of (n,) samples; before the first the valve stands at `start`.

    Examples
    --------
    >>> through_valve(np.array([0.0, 3.0, 2.5, 1.0, 5.0]), 0.0, 1.0, 1.0).tolist()
    [0.0, 2.0, 2.0, 2.0, 4.0]
    >>> through_valve(np.array([0.0, 3.0, 2.5, 1.0, 5.0]), 0.0, 1.0, 0.25).tolist()
    [0.0, 2.75, 2.75, 1.25, 4.75]
    """
    new = np.diff(command, prepend=np.nan) != 0.0
    levels = command[new].tolist()
    at, out = float(start), np.empty(len(levels))
    for i, u in enumerate(levels):
        gap = u - at
        if gap > band:
            at = u - short
        elif gap < -band:
            at = u + short
        out[i] = at
    return np.asarray(out[np.cumsum(new) - 1])
