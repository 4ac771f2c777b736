"""Whether a parameter drifts from one date to the next: a straight line through what each record says of it."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.stats import t as student

from .confront import Change

FEWEST = 3
_SURE = 0.01


@dataclass(frozen=True)
class Trend:
    """How one parameter moves.

    Attributes
    ----------
    name : str
    per_day : float
        Of the logarithm; of the dead time in s.
    low, high : float
        95 % interval of `per_day`.
    p_value : float
        Of no drift.
    drifting : bool
    """

    name: str
    per_day: float
    low: float
    high: float
    p_value: float
    drifting: bool


def trends(days: Sequence[float], changes: Sequence[tuple[Change, ...]]) -> tuple[Trend, ...]:
    """A weighted line through each parameter; empty with fewer than three dates.

    Parameters
    ----------
    days : sequence of float, length m
        When each record was taken.
    changes : sequence of tuple of Change, length m
        Of each record beside the same earlier fit, whose own error is common to all and no part of a drift.

    Notes
    -----
    Each record weighs by what it alone leaves open; where the records scatter more than that, the line's error grows
    with them (chi-squared per degree of freedom, common practice). Student's t with m - 2 degrees of freedom, the
    chance divided by the number of parameters (Bonferroni, from memory).
    """
    if len(set(days)) < FEWEST:
        return ()
    count = len(changes[0])
    return tuple(_line(np.asarray(days), [record[i] for record in changes], count) for i in range(count))


def _line(days: np.ndarray, points: list[Change], tests: int) -> Trend:
    moved = np.array([point.difference for point in points])
    weight = 1.0 / np.maximum(np.array([point.own_error for point in points]), 1e-300) ** 2
    weight = weight / weight.max()
    centre = float(np.sum(weight * days) / np.sum(weight))
    level = float(np.sum(weight * moved) / np.sum(weight))
    reach = float(np.sum(weight * (days - centre) ** 2))
    slope = float(np.sum(weight * (days - centre) * moved) / reach)
    own = float(np.min([point.own_error for point in points]))
    left = moved - level - slope * (days - centre)
    freedom = len(points) - 2
    scatter = float(np.sum(weight * left**2)) / (freedom * own**2) if freedom else 1.0
    error = own * max(scatter, 1.0) ** 0.5 / reach**0.5
    p_value = float(2.0 * student.sf(abs(slope) / error, max(freedom, 1)))
    half = float(student.ppf(0.975, max(freedom, 1))) * error
    return Trend(points[0].name, slope, slope - half, slope + half, p_value, p_value < _SURE / tests)
