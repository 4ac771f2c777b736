"""What a fit hands on: the plant, its parameters with intervals, the noise, and the plausible plants."""

from dataclasses import dataclass, field, replace

import numpy as np

from .bend import Bend
from .plant import Plant
from .play import Sticking, Valve
from .run import Between, FloatArray, Run
from .tables import FittedTable


@dataclass(frozen=True)
class Parameter:
    """One fitted parameter with its honest 95 % interval.

    Attributes
    ----------
    name : str
        "gain", "dead time", "time constant" (" 1", " 2"), "natural frequency", "damping ratio", "zero time".
    value, std_error, low, high : float, in `unit`
    unit : str
    """

    name: str
    value: float
    unit: str
    std_error: float
    low: float
    high: float


@dataclass(frozen=True)
class Noise:
    """Measurement noise of the response, an ARMA(1, 1) process: e[k] - rho e[k-1] = w[k] + c w[k-1].

    Attributes
    ----------
    interval : float, s
        Between samples of the record it was estimated on.
    std : float, response unit
        Of the noise itself.
    innovation_std : float, response unit
        Of w.
    rho, c : float
    """

    interval: float
    std: float
    innovation_std: float
    rho: float = 0.0
    c: float = 0.0


@dataclass(frozen=True, eq=False)
class Plausible:
    """Plants drawn from what the records leave open, of equal weight.

    Attributes
    ----------
    plants : tuple of Plant, length p
    operating_command : (p,) array, command unit
        The command that holds the operating response, one a plant.
    stiction : (p,) array, command unit
        Change of command that friction swallows before the response moves; 0 where none was found.
    valves : (p, 3) array or None, command unit
        Of a valve that sticks before each plant: the band within which the command moves nothing, how far short of
        the command it rests, and how far above it the command stands at rest. None where none was found.
    curves : (p, 2) array or None
        Of a gain that differs along the command: the bend b, per command unit, about the operating command, and the
        gain of the plant over that at the operating command, 1. A large move u drives the plant by (u + b u^2) / gain.
        None where the gain is the same all along.
    """

    plants: tuple[Plant, ...]
    operating_command: FloatArray
    stiction: FloatArray
    valves: FloatArray | None = None
    curves: FloatArray | None = None

    def locally(self, slopes: FloatArray, bends: FloatArray) -> "Plausible":
        """The same plants about other commands, behind curves that bring them back to their gain at the operating one.

        Parameters
        ----------
        slopes : (p,) array
            Gain there over that at the operating command.
        bends : (p,) array, per command unit
        """
        return replace(self._times(slopes), curves=np.column_stack([bends, slopes]))

    @property
    def straight(self) -> "Plausible":
        """The same plants at their gain at the operating command."""
        return self if self.curves is None else replace(self._times(1.0 / self.curves[:, 1]), curves=None)

    def _times(self, factors: FloatArray) -> "Plausible":
        each = zip(self.plants, factors.tolist(), strict=True)
        return replace(self, plants=tuple(replace(p, numerator=tuple(k * c for c in p.numerator)) for p, k in each))

    def take(self, chosen: FloatArray | list[int] | slice) -> "Plausible":
        """The chosen ones, by index."""
        index = np.arange(len(self.plants))[chosen]
        valves = None if self.valves is None else self.valves[index]
        curves = None if self.curves is None else self.curves[index]
        return Plausible(
            tuple(self.plants[i] for i in index), self.operating_command[index], self.stiction[index], valves, curves
        )

    def led_by(self, plant: Plant, operating_command: float) -> "Plausible":
        """The same behind one plant more, which takes the median friction and the median valve, at rest amid its band,
        and the median curve about the operating command.

        Parameters
        ----------
        plant : Plant
        operating_command : float, command unit
        """
        stiction = float(np.median(self.stiction)) if self.stiction.size else 0.0
        valves = self.valves
        if valves is not None:
            middle = np.median(valves, axis=0) * [1.0, 1.0, 0.0] if len(valves) else np.zeros(3)
            valves = np.vstack([middle, valves])
        curves = self.curves
        if curves is not None:
            curves = np.vstack([[np.median(curves[:, 0]) if len(curves) else 0.0, 1.0], curves])
        return Plausible(
            (plant, *self.plants),
            np.concatenate([[operating_command], self.operating_command]),
            np.concatenate([[stiction], self.stiction]),
            valves,
            curves,
        )


@dataclass(frozen=True)
class Candidate:
    """One structure that was tried: how well it explains the records, and the evidence for it.

    Attributes
    ----------
    structure : str
    misfit : float
        rms of the residual / standard deviation of the response.
    criterion : float
        Bayesian information criterion on the whitened residual; smaller is better.
    weight : float
        Share of the evidence among the candidates.
    note : str
        Why it was dropped or kept, in words.
    """

    structure: str
    misfit: float
    criterion: float
    weight: float
    note: str = ""


@dataclass(frozen=True, eq=False)
class FittedRun:
    """One fitted record beside its model.

    Attributes
    ----------
    label : str
    time : (n,) array, s
    command, response, model : (n,) arrays
        model: free run of the plant with the fitted offset of this record.
    offset : float, response unit
        Fitted level of the response at the operating command (integrating plants: at the record's start).
    """

    label: str
    time: FloatArray
    command: FloatArray
    response: FloatArray
    model: FloatArray
    offset: float


@dataclass(frozen=True, eq=False)
class Fit:
    """The whole answer of identification.

    Attributes
    ----------
    structure : str
        Name in words, as the catalogue has it.
    plant : Plant
    parameters : tuple of Parameter
    covariance : (q, q) array
        Of the parameters, in their order and units.
    operating_command, operating_response : float
        Where the deviations start from.
    operating_command_interval : (low, high), command unit
    noise : Noise
    runs : tuple of FittedRun
    misfit : float
        rms of the residual over all fitted samples / standard deviation of the response.
    candidates : tuple of Candidate, best first
    ties : tuple of str
        Structures that the records can't tell apart from the chosen one.
    plausible : Plausible
        At least 1,200 plants; of the tied structures too, in proportion to their evidence.
    explanation : str
        Why this structure, in a sentence or two.
    cautions : tuple of str
    drift : bool
        The noise looks like a wandering level rather than a stationary one.
    draws : (m, s + 2) or (m, s + 3) array
        Draws of the chosen structure's internal parameters: log shapes, dead time (s), gain; with a zero, gain times
        zero time too.
    between : {"held", "interpolated"}
        What the command was taken to do between samples where no run said so.
    friction : (forward, backward), command unit
        Dry friction of the fitted plant; zeros where the structure has none.
    tables : tuple of FittedTable
        Frequency tables among what was fitted. With tables alone `runs` is empty and the noise in time is not known:
        its standard deviation is zero.
    sticking : Sticking or None
        A valve that sticks before the plant, and what is open about it; None where the records show none.
    bend : Bend or None
        How the gain differs along the command; None where the records show no difference. Then the plant is that about
        the operating command.
    """

    structure: str
    plant: Plant
    parameters: tuple[Parameter, ...]
    covariance: FloatArray
    operating_command: float
    operating_response: float
    operating_command_interval: tuple[float, float]
    noise: Noise
    runs: tuple[FittedRun, ...]
    misfit: float
    candidates: tuple[Candidate, ...]
    ties: tuple[str, ...]
    plausible: Plausible
    explanation: str
    cautions: tuple[str, ...] = ()
    drift: bool = False
    draws: FloatArray = field(default_factory=lambda: np.zeros((0, 0)))
    between: Between = "held"
    friction: tuple[float, float] = (0.0, 0.0)
    tables: tuple[FittedTable, ...] = ()
    sticking: Sticking | None = None
    bend: Bend | None = None

    def through(self, run: Run) -> Run:
        """The run with the command that drives the plant, behind bend and valve."""
        return self.valve.through(run if self.bend is None else self.bend.through(run))

    @property
    def valve(self) -> Valve:
        """The valve before the plant; one that follows where none was found, or perhaps one."""
        return self.sticking.valve if self.sticking is not None and self.sticking.sure else Valve()
