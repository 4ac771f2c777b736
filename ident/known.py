"""A plant as an earlier sheet knows it: named parameters with their covariance, and what they make plausible."""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from .fitted import Plausible
from .plant import Plant
from .run import FloatArray

_SURE = 0.4  # relative error up to which a positive parameter is handled by its logarithm


@dataclass(frozen=True, eq=False)
class Known:
    """What is left of a fit when only its sheet is at hand.

    Attributes
    ----------
    structure : str
    plant : Plant
    names : tuple of str
        "gain", "dead time", and those of the structure.
    units : tuple of str
    values : (q,) array
    covariance : (q, q) array
    freedom : float
        Independent samples behind the covariance, less the parameters; infinite where nobody knows.
    """

    structure: str
    plant: Plant
    names: tuple[str, ...]
    units: tuple[str, ...]
    values: FloatArray
    covariance: FloatArray
    freedom: float = np.inf


def plant_of_parameters(names: tuple[str, ...], values: FloatArray, like: Plant) -> Plant:
    """The plant that named parameters describe.

    gain times (Tz s + 1) over the product of s (for each integrator of `like`), (T s + 1) for each time constant and
    s^2/wn^2 + 2 z s/wn + 1; two modes with a share of the second stand side by side, opposed where they are in `like`.

    Parameters
    ----------
    names : tuple of str
    values : (q,) array
    like : Plant
        Of the same structure: how many integrators there are.

    Examples
    --------
    >>> names, like = ("gain", "dead time", "time constant"), Plant((1.0,), (1.0, 1.0))
    >>> plant_of_parameters(names, np.array([2.0, 0.1, 0.5]), like)
    Plant(numerator=(2.0,), denominator=(0.5, 1.0), dead_time=0.1)
    """
    known = dict(zip(names, (float(v) for v in values), strict=True))
    below = np.array([1.0])
    for name, value in known.items():
        if name.startswith("time constant"):
            below = np.polymul(below, [value, 1.0])
    modes = [_mode(known, tail) for tail in ("", " 1", " 2") if f"natural frequency{tail}" in known]
    for mode in modes:
        below = np.polymul(below, mode)
    below = np.concatenate([below, np.zeros(like.integrators)])
    above = known["gain"] * np.array([known["zero time"], 1.0] if "zero time" in known else [1.0])
    if "share of mode 2" in known:
        share = known["share of mode 2"]
        share = -share if _opposed(like, *modes) else share
        above = known["gain"] * (modes[1] + share * modes[0]) / (1.0 + share)
    return Plant(tuple(float(a) for a in above), tuple(float(b) for b in below), max(known["dead time"], 0.0))


def _mode(known: Mapping[str, float], tail: str) -> FloatArray:
    frequency, ratio = known[f"natural frequency{tail}"], known[f"damping ratio{tail}"]
    return np.array([1.0 / frequency**2, 2.0 * ratio / frequency, 1.0])


def _opposed(like: Plant, first: FloatArray, second: FloatArray) -> bool:
    """Whether the second mode of two moves against the first: in phase, the numerator is a mean of the two modes."""
    return not min(first[0], second[0]) <= like.numerator[0] / like.numerator[-1] <= max(first[0], second[0])


def by_logarithm(known: Mapping[str, tuple[float, float]]) -> dict[str, bool]:
    """Which parameters are compared and drawn by their logarithm: positive ones that are sure enough.

    Parameters
    ----------
    known : name to (value, standard error)
    """
    return {
        name: name not in ("gain", "dead time") and value > 0.0 and error < _SURE * value
        for name, (value, error) in known.items()
    }


def plausible_of(known: Known, count: int, operating_command: FloatArray, seed: int = 0) -> Plausible:
    """Plants drawn from the parameters and their covariance, where the draws themselves are not at hand.

    Parameters
    ----------
    operating_command : (2,) array
        Value and standard error; drawn independently of the plant.
    """
    rng = np.random.default_rng(seed)
    errors = np.sqrt(np.maximum(np.diag(known.covariance), 0.0))
    logs = by_logarithm(dict(zip(known.names, zip(known.values, errors, strict=True), strict=True)))
    scale = np.array([value if logs[name] else 1.0 for name, value in zip(known.names, known.values, strict=True)])
    spread = known.covariance / np.outer(scale, scale)
    moves = rng.multivariate_normal(np.zeros(len(scale)), spread, size=count, method="eigh")
    plain = known.values + moves
    drawn = np.where([logs[name] for name in known.names], known.values * np.exp(moves), plain)
    plants = tuple(plant_of_parameters(known.names, row, known.plant) for row in _sensible(known, drawn))
    frictions = [i for i, name in enumerate(known.names) if name.startswith("friction")]
    stiction = np.maximum(drawn[:, frictions], 0.0).max(axis=1) if frictions else np.zeros(count)
    commands = operating_command[0] + operating_command[1] * rng.standard_normal(count)
    return Plausible(plants, commands, stiction)


def _sensible(known: Known, drawn: FloatArray) -> FloatArray:
    """Times, frequencies and dampings stay above a thousandth of their value, whatever the covariance says."""
    floor = np.where([name == "gain" for name in known.names], -np.inf, 1e-3 * np.abs(known.values))
    return np.asarray(np.maximum(drawn, floor))
