"""What has changed between an earlier fit and a new one: each parameter with its interval, and all of them jointly."""

from dataclasses import dataclass

import numpy as np
from scipy.stats import f as fisher
from scipy.stats import norm

from .fitted import Fit
from .known import Known, by_logarithm
from .noise import effective_samples
from .run import FloatArray
from .whiten import Colour

CHANGED = 0.05  # chance of a false alarm of the joint test
_NORMAL_95 = float(norm.ppf(0.975))


@dataclass(frozen=True)
class ParameterChange:
    """One parameter, before and after.

    Attributes
    ----------
    name, unit : str
    before, after, difference : float, in `unit`
    low, high : float
        95 % interval of the difference.
    changed : bool
        The joint test says that something did, and this interval leaves out zero.
    """

    name: str
    unit: str
    before: float
    after: float
    difference: float
    low: float
    high: float
    changed: bool


@dataclass(frozen=True, eq=False)
class Changed:
    """The whole answer.

    Attributes
    ----------
    parameters : tuple of ParameterChange
    p_value : float or None
        Of no change in all parameters jointly; None where the structures can't be compared.
    changed : bool
    """

    parameters: tuple[ParameterChange, ...]
    p_value: float | None
    changed: bool


def known_of(fit: Fit) -> Known:
    """The parameters of a fit as an earlier sheet would know them."""
    samples = sum(int(np.sum(np.isfinite(run.response))) for run in fit.runs)
    colour = Colour(fit.noise.rho, fit.noise.c)
    unknowns = len(fit.parameters) + len(fit.runs)
    freedom = max(effective_samples(samples, colour) - unknowns, 4.0) if samples else np.inf
    return Known(
        fit.structure,
        fit.plant,
        tuple(parameter.name for parameter in fit.parameters),
        tuple(parameter.unit for parameter in fit.parameters),
        np.array([parameter.value for parameter in fit.parameters]),
        fit.covariance,
        freedom,
    )


def changes(before: Known, after: Known) -> Changed:
    """Compare two fits of one structure.

    The covariances carry the colour of the noise; their sum is that of the difference, because the records are
    different ones. Wald's statistic d' C^-1 d / q is held against Fisher's distribution with the effective number of
    samples, which coloured noise makes smaller. Positive parameters are compared by their logarithms.

    Parameters
    ----------
    before, after : Known
        With the same names in the same order; else nothing is compared parameter by parameter.

    References
    ----------
    Wald, A., Trans. Am. Math. Soc. 54 (1943) 426-482: tests on several parameters (from memory).
    """
    if before.names != after.names:
        return Changed((), None, True)
    before_scaled, after_scaled = _scales(before, after)
    spread = before.covariance / np.outer(*[before_scaled] * 2) + after.covariance / np.outer(*[after_scaled] * 2)
    difference = _moved(before, after)
    errors = np.sqrt(np.diag(spread))
    p_value = _joint(difference, spread, min(before.freedom, after.freedom))
    changed = p_value < CHANGED
    rows = tuple(_row(before, after, i, difference[i], errors[i], changed) for i in range(len(before.names)))
    return Changed(rows, p_value, changed)


def _logs(before: Known, after: Known) -> list[bool]:
    """Which parameters both fits know well enough for a logarithm."""
    sides = []
    for known in (before, after):
        errors = np.sqrt(np.maximum(np.diag(known.covariance), 0.0))
        table = {n: (float(v), float(e)) for n, v, e in zip(known.names, known.values, errors, strict=True)}
        sides.append(by_logarithm(table))
    return [sides[0][name] and sides[1][name] for name in before.names]


def _scales(before: Known, after: Known) -> tuple[FloatArray, FloatArray]:
    logs = _logs(before, after)
    return np.where(logs, before.values, 1.0), np.where(logs, after.values, 1.0)


def _moved(before: Known, after: Known) -> FloatArray:
    logs = np.array(_logs(before, after))
    with np.errstate(invalid="ignore", divide="ignore"):
        ratio = np.log(np.where(logs, after.values / before.values, 1.0))
    return np.where(logs, ratio, after.values - before.values)


def _joint(difference: FloatArray, spread: FloatArray, freedom: float) -> float:
    """Chance that a difference as large as this comes from the noise alone."""
    errors = np.sqrt(np.maximum(np.diag(spread), 1e-300))
    scaled = difference / errors
    correlation = spread / np.outer(errors, errors) + 1e-9 * np.eye(len(errors))
    distance = float(scaled @ np.linalg.solve(correlation, scaled)) / len(scaled)
    return float(fisher.sf(distance, len(scaled), min(freedom, 1e7)))


def _row(before: Known, after: Known, i: int, moved: float, error: float, changed: bool) -> ParameterChange:
    old, new = float(before.values[i]), float(after.values[i])
    ends = np.array([moved - _NORMAL_95 * error, moved + _NORMAL_95 * error])
    if _logs(before, after)[i]:
        ends = old * np.expm1(ends)
    low, high = (float(end) for end in np.sort(ends))
    apart = changed and not low <= 0.0 <= high
    return ParameterChange(before.names[i], before.units[i], old, new, new - old, low, high, apart)
