"""A record that was not fitted, fitted by itself: the plants it makes plausible, and whether they are others."""

from dataclasses import dataclass, replace

import numpy as np
from scipy.stats import f as fisher

from .catalogue import CATALOGUE
from .choose import Fitted, colour_of, steady_fit
from .ensemble import Drawn, draw_structure, freedom_of, plausible_plants
from .fitted import Fit, Plausible
from .friction import rough_free_run
from .polish import polish
from .regression import Regression
from .run import FloatArray, Run
from .start import first_guesses
from .whiten import WHITE, Colour

_DRAWS = 1024
_JOINT = 120
# A residual above this multiple of the fitted noise: the earlier parameters may be too far off to start from.
_SURPRISED = 1.3


@dataclass(frozen=True, eq=False)
class Change:
    """One parameter in the earlier fit and in the new record.

    Attributes
    ----------
    name : str
    ratio : float
        New over fitted; for the dead time 1 + difference over (fitted dead time + slowest time of the plant).
    score : float
        Difference over its standard error.
    difference : float
        As compared: of logarithms; of the dead time in s.
    own_error : float
        What the new record alone leaves open of it.
    """

    name: str
    ratio: float
    score: float
    difference: float = 0.0
    own_error: float = 0.0


@dataclass(frozen=True, eq=False)
class Confronted:
    """What a fresh record says by itself.

    Attributes
    ----------
    plausible : Plausible
        Plants that this record makes plausible.
    p_value : float
        Of no change, in all parameters jointly; honest under coloured noise as far as the intervals are.
    changes : tuple of Change
    noise_std : float, response unit
        Residual of this record's own fit.
    log_likelihood : (p,) array
        Of the first p plausible plants of the earlier fit under this record, its level and drift free.
    """

    plausible: Plausible
    p_value: float
    changes: tuple[Change, ...]
    noise_std: float
    log_likelihood: FloatArray


def confront(run: Run, fit: Fit, seed: int = 1) -> Confronted:
    """Fit the chosen structure to one fresh record and compare.

    The level of the response, and for an integrating plant its drift, are free: a held-out record tells about the plant
    whatever the operating point did.
    """
    structure = next(s for s in CATALOGUE if s.name == fit.structure)
    if run.between == "auto":
        run = replace(run, between=fit.between)
    problem = Regression((run,), structure, fit.operating_command, False)
    centre = np.median(fit.draws, axis=0)
    theta, solved = polish(problem, centre[:-1])
    if np.sqrt(solved.cost / len(problem.measured)) > _SURPRISED * fit.noise.std:
        ends = [(theta, solved), *(polish(problem, guess) for guess in first_guesses(problem, 2))]
        theta, solved = min(ends, key=lambda end: end[1].cost)
    alone = Fitted(problem, theta, solved, 0.0, 0.0)
    colour = colour_of(alone)
    theta, solved = polish(problem, theta, colour, rounds=12)
    alone = steady_fit(Fitted(problem, theta, solved, 0.0, 0.0))
    drawn = draw_structure(alone, colour, _DRAWS, seed)
    return _compared(fit, drawn, colour, _log_likelihood(fit, alone, colour))


def _log_likelihood(fit: Fit, alone: Fitted, colour: Colour) -> FloatArray:
    """(p,) Student-t log likelihood of fitted plants, the noise of this record's own best fit."""
    problem = alone.problem
    best = problem.solve(alone.theta, colour).cost
    initial = problem.initial_columns(problem.split(alone.theta)[0])
    free = problem.fixed_columns if initial is None else np.column_stack([problem.fixed_columns, initial])
    target = problem.whitener(colour).apply(np.column_stack([problem.measured, free]))
    basis, _ = np.linalg.qr(target[:, 1:])
    costs = []
    for plant, friction in zip(fit.plausible.plants[:_JOINT], fit.plausible.stiction, strict=False):
        pair = (float(friction), float(friction)) if friction > 0 else (0.0, 0.0)
        model = rough_free_run(plant, problem.runs[0], fit.operating_command, 0.0, pair)[problem.runs[0].valid]
        away = target[:, 0] - problem.whitener(colour).apply(model)
        away = away - basis @ (basis.T @ away)
        costs.append(float(away @ away))
    freedom = freedom_of(problem, colour, len(alone.theta) + len(alone.solved.coefficients))
    size = len(problem.measured) if alone.whitened else freedom
    return np.asarray(-0.5 * size * np.log(np.maximum(np.array(costs), best) / best))


def _compared(fit: Fit, drawn: Drawn, colour: Colour, log_likelihood: FloatArray) -> Confronted:
    size = np.hypot(_spread_of(fit.draws[:, -1]), _spread_of(drawn.draws[:, fit.draws.shape[1] - 1]))
    size = float(np.copysign(size, np.median(fit.draws[:, -1])))
    before, after = _straightened(fit.draws, size), _straightened(drawn.draws[:, : fit.draws.shape[1]], size)
    spread = _robust_covariance(before) + _robust_covariance(after)
    difference = np.median(after, axis=0) - np.median(before, axis=0)
    distance = float(difference @ np.linalg.solve(spread, difference))
    freedom = freedom_of(drawn.fitted.problem, colour, len(difference) + 1)
    p_value = float(fisher.sf(distance / len(difference), len(difference), freedom))
    return Confronted(
        plausible=plausible_plants([drawn], np.ones(1), fit.operating_response, _DRAWS),
        p_value=p_value,
        changes=_changes(fit, drawn, difference, np.sqrt(np.diag(spread)), np.sqrt(np.diag(_robust_covariance(after)))),
        noise_std=_own_residual(drawn.fitted),
        log_likelihood=log_likelihood,
    )


def _straightened(draws: FloatArray, size: float) -> FloatArray:
    """Draws with the gain by its inverse hyperbolic sine: a logarithm where it is sure, and signed where it is not.

    A bare logarithm of the size would let a gain of the other sign pass for no change. `size` bears the sign of the
    fitted gain, so that a larger gain counts up.
    """
    out = draws.copy()
    out[:, -1] = np.arcsinh(draws[:, -1] / size)
    return out


def _spread_of(gains: FloatArray) -> float:
    """Half the distance of the 16 and 84 % quantiles: a standard deviation that heavy tails don't move."""
    low, high = np.quantile(gains, [0.16, 0.84])
    return float(max(0.5 * (high - low), 1e-12 * abs(high), 1e-300))


def _robust_covariance(draws: FloatArray) -> FloatArray:
    """Covariance with heavy tails cut at the 1 and 99 % quantiles."""
    low, high = np.quantile(draws, [0.01, 0.99], axis=0)
    return np.atleast_2d(np.cov(np.clip(draws, low, high).T)) + 1e-18 * np.eye(draws.shape[1])


def _changes(fit: Fit, drawn: Drawn, difference: FloatArray, errors: FloatArray, own: FloatArray) -> tuple[Change, ...]:
    structure = next(s for s in CATALOGUE if s.name == fit.structure)
    shapes = len(difference) - 2
    slowest = float(np.max(1.0 / np.maximum(np.abs(fit.plant.poles[fit.plant.poles != 0]), 1e-300), initial=0.0))
    scale = fit.plant.dead_time + slowest
    ratio = float(np.median(drawn.draws[:, shapes + 1]) / np.median(fit.draws[:, -1]))
    scores, moved, alone = (difference / errors).tolist(), difference.tolist(), own.tolist()
    out = [Change("gain", ratio, scores[-1], moved[-1], alone[-1])]
    lag = 1.0 + float(difference[shapes]) / scale if scale > 0 else 1.0
    out.append(Change("dead time", lag, scores[shapes], moved[shapes], alone[shapes]))
    for i, shape in enumerate(structure.shapes):
        out.append(Change(shape.name, float(np.exp(difference[i])), scores[i], moved[i], alone[i]))
    return tuple(out)


def _own_residual(alone: Fitted) -> float:
    solved = alone.problem.solve(alone.theta, WHITE)
    return float(np.sqrt(solved.cost / max(len(alone.problem.measured), 1)))
