"""A plant that is known already: its tolerance makes the plausible plants, and it stands where a fit would."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.stats import qmc

from .fitted import Fit, Noise, Parameter, Plausible
from .plant import Plant
from .run import FloatArray

_PLANTS = 1280
_CORNERS = np.array([[g, d, p] for g in (-1.0, 1.0) for d in (-1.0, 1.0) for p in (-1.0, 1.0)])
STRUCTURE = "given plant"


@dataclass(frozen=True)
class Tolerance:
    """How far each may be off, as a fraction: the plausible plants lie evenly within, the corners among them.

    Attributes
    ----------
    gain, dead_time, poles : float
        poles: every pole away from the origin is scaled by one common factor; the gain at rest is kept by it.
    """

    gain: float = 0.2
    dead_time: float = 0.2
    poles: float = 0.2


@dataclass(frozen=True)
class GivenPlant:
    """A plant from the rig file.

    Attributes
    ----------
    plant : Plant
    tolerance : Tolerance
    source : str
        Where it stands, in words.
    structure : str
    stiction : float, command unit
        Change of command that friction swallows.
    """

    plant: Plant
    tolerance: Tolerance = Tolerance()
    source: str = "rig file"
    structure: str = STRUCTURE
    stiction: float = 0.0


def fit_of_given(
    given: GivenPlant, *, operating_command: float, operating_response: float, noise: Noise | None = None
) -> Fit:
    """The given plant in the place of a fit: nothing was fitted, so runs, candidates and noise are empty.

    Parameters
    ----------
    given : GivenPlant
    operating_command, operating_response : float
        Absolute readings from which the deviations start.
    noise : Noise, optional
        Of a held-out run; default: none is known, with a standard deviation of zero.
    """
    draws = tolerance_draws(given.tolerance, _PLANTS)
    plants = tuple(varied(given.plant, row) for row in draws)
    parameters, covariance = _parameters(given.plant, plants)
    count = len(plants)
    tolerance = given.tolerance
    return Fit(
        structure=given.structure,
        plant=given.plant,
        parameters=parameters,
        covariance=covariance,
        operating_command=operating_command,
        operating_response=operating_response,
        operating_command_interval=(operating_command, operating_command),
        noise=noise or Noise(1.0, 0.0, 0.0),
        runs=(),
        misfit=0.0,
        candidates=(),
        ties=(),
        plausible=Plausible(plants, np.full(count, operating_command), np.full(count, given.stiction)),
        explanation=(
            f"The plant was given ({given.source}), not fitted; the plausible plants lie within {_percent(tolerance)}."
        ),
        cautions=("the plant was given, not measured: nothing here says that the rig behaves like it",),
    )


def _percent(tolerance: Tolerance) -> str:
    return (
        f"{100 * tolerance.gain:g} % of its gain, {100 * tolerance.dead_time:g} % of its dead time and "
        f"{100 * tolerance.poles:g} % of its poles"
    )


def tolerance_draws(tolerance: Tolerance, count: int, seed: int = 0) -> FloatArray:
    """(count, 3) factors on gain, dead time and poles: evenly spread, the eight corners first.

    Examples
    --------
    >>> tolerance_draws(Tolerance(0.2, 0.0, 0.1), 16)[:2].tolist()
    [[0.8, 1.0, 0.9], [0.8, 1.0, 1.1]]
    """
    spread = 2.0 * qmc.Halton(3, seed=seed).random(max(count - len(_CORNERS), 0)) - 1.0
    units = np.concatenate([_CORNERS, spread])[:count]
    return np.asarray(1.0 + units * np.array([tolerance.gain, tolerance.dead_time, tolerance.poles]))


def varied(plant: Plant, factors: FloatArray) -> Plant:
    """The plant with gain and dead time scaled and all its poles (but those at the origin) moved, the rest kept.

    Poles times f turn D(s) into D(s/f); its last coefficient, and so the gain at rest, stays.
    """
    gain, dead_time, pace = (float(f) for f in factors)
    order = len(plant.denominator) - 1
    powers = pace ** (plant.integrators - np.arange(order, -1, -1.0))
    bottom = tuple(float(c) for c in np.asarray(plant.denominator) * powers)
    return Plant(tuple(gain * c for c in plant.numerator), bottom, dead_time * plant.dead_time)


def plant_sign(plant: Plant) -> float:
    """The sign that a compensator must have for K > 0: of N(0) over the leading coefficient of D.

    For a stable plant it is that of the gain at rest; an odd number of unstable poles turns that round.

    Examples
    --------
    >>> plant_sign(Plant((1.0,), (1.0, -1.0))), plant_sign(Plant((-2.0,), (1.0, 1.0)))
    (1.0, -1.0)
    """
    last = next((c for c in reversed(plant.numerator) if c != 0.0), 1.0)
    first = next((c for c in plant.denominator if c != 0.0), 1.0)
    return -1.0 if last * first < 0.0 else 1.0


def _parameters(plant: Plant, plants: Sequence[Plant]) -> tuple[tuple[Parameter, ...], FloatArray]:
    names, units, value = _described(plant)
    table = np.array([_described(each)[2] for each in plants])
    low, high = np.quantile(table, [0.025, 0.975], axis=0)
    covariance = np.atleast_2d(np.cov(table.T))
    rows = zip(names, value, units, np.sqrt(np.diag(covariance)), low, high, strict=True)
    return tuple(Parameter(n, float(v), u, float(s), float(a), float(b)) for n, v, u, s, a, b in rows), covariance


def _described(plant: Plant) -> tuple[list[str], list[str], FloatArray]:
    """Gain, dead time, then time constants of the stable real poles and natural frequency and damping of the pairs."""
    poles = plant.poles
    moving = poles[np.abs(poles) > 1e-9 * np.abs(poles).max(initial=0.0)]
    real = np.sort(moving[np.abs(moving.imag) <= 1e-9 * np.abs(moving)].real)[::-1]
    pairs = sorted(moving[moving.imag > 1e-9 * np.abs(moving)], key=abs)
    names, units, values = ["gain", "dead time"], ["gain", "s"], [plant.static_gain, plant.dead_time]
    for place, pole in enumerate(real):
        names.append("time constant" if real.size == 1 else f"time constant {place + 1}")
        units.append("s")
        values.append(-1.0 / pole)
    for place, pole in enumerate(pairs):
        tail = "" if len(pairs) == 1 else f" {place + 1}"
        names += [f"natural frequency{tail}", f"damping ratio{tail}"]
        units += ["rad/s", "1"]
        values += [abs(pole), -pole.real / abs(pole)]
    return names, units, np.array(values, dtype=float)
