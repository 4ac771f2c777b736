"""A record that was not fitted, fitted by itself: the plants it makes plausible, and whether they are others."""

from dataclasses import dataclass, replace

import numpy as np
from scipy.special import nctdtrinc
from scipy.stats import f as fisher
from scipy.stats import norm
from scipy.stats import t as student

from .catalogue import CATALOGUE
from .choose import Fitted, colour_of, steady_fit
from .ensemble import Drawn, draw_structure, freedom_of, internal_draws, plant_of, plausible_plants, stiction_of
from .fitted import Fit, Plausible
from .friction import rough_free_run
from .polish import polish
from .regression import Regression
from .run import FloatArray, Run
from .start import first_guesses
from .whiten import WHITE, Colour

_DRAWS = 1024
_JOINT = 400
# A residual above this multiple of the fitted noise: the earlier parameters may be too far off to start from.
_SURPRISED = 1.3
# A level further from the fitted one than this many standard errors has moved: the fresh run's own one counts.
_MOVED = 3.0


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
    joint : Plausible
        Plants of the earlier fit, about the operating command that fit and record give together, or where the level
        has moved, about the record's own.
    joint_weights : (p,) array
        How well each of them explains this record too; they sum to one.
    spread : (q, q) array
        Of the parameters' differences: log shapes, dead time in s, gain (see `_straightened`), and a zero's.
    gain_scale : float
        Of the straightened gain.
    freedom : float
        That the noise is known with.
    """

    plausible: Plausible
    p_value: float
    changes: tuple[Change, ...]
    noise_std: float
    joint: Plausible
    joint_weights: FloatArray
    spread: FloatArray
    gain_scale: float
    freedom: float

    def visible(self, before: FloatArray, after: FloatArray, level: float = 0.05, power: float = 0.95) -> float:
        """How large a change is beside the smallest one in its direction that these records show.

        A one-sided t test for a change in this very direction, the rest unchanged. Above one: it would have been seen.

        Parameters
        ----------
        before, after : (q,) arrays
            Internal parameters, as in `Fit.draws`.
        level, power : float
            Chance of a false alarm; chance of seeing it.
        """
        at = _gain_place(self.changes)
        ends = _straightened(np.array([before, after]), at, self.gain_scale)
        size = float(np.sqrt(_distance(ends[1] - ends[0], self.spread)))
        least = nctdtrinc(self.freedom, 1.0 - power, student.isf(level, self.freedom))
        return size / float(least)


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
    theta, solved = polish(problem, centre[: len(structure.shapes) + 1])
    if np.sqrt(solved.cost / len(problem.measured)) > _SURPRISED * fit.noise.std:
        ends = [(theta, solved), *(polish(problem, guess) for guess in first_guesses(problem, 2))]
        theta, solved = min(ends, key=lambda end: end[1].cost)
    alone = Fitted(problem, theta, solved, 0.0, 0.0)
    colour = colour_of(alone)
    theta, solved = polish(problem, theta, colour, rounds=12)
    alone = steady_fit(Fitted(problem, theta, solved, 0.0, 0.0))
    drawn = draw_structure(alone, colour, _DRAWS, seed)
    found = _compared(fit, drawn, colour)
    if alone.whitened:
        return found
    # draws about plain least squares are too sure of what a wandering level can mimic
    logs = _log_likelihood(found.joint, fit, alone, colour)
    weights = np.exp(logs - logs.max())
    return replace(found, joint_weights=weights / weights.sum())


def _log_likelihood(plausible: Plausible, fit: Fit, alone: Fitted, colour: Colour) -> FloatArray:
    """(p,) Student-t log likelihood of plants, level and drift free, the noise of this record's own best fit."""
    problem = alone.problem
    initial = problem.initial_columns(problem.split(alone.theta)[0])
    free = problem.fixed_columns if initial is None else np.column_stack([problem.fixed_columns, initial])
    target = problem.whitener(colour).apply(np.column_stack([problem.measured, free]))
    basis, _ = np.linalg.qr(target[:, 1:])
    costs = []
    for plant, friction in zip(plausible.plants, plausible.stiction, strict=True):
        pair = (float(friction), float(friction)) if friction > 0 else (0.0, 0.0)
        model = rough_free_run(plant, problem.runs[0], fit.operating_command, 0.0, pair)[problem.runs[0].valid]
        away = target[:, 0] - problem.whitener(colour).apply(model[:, None])[:, 0]
        away = away - basis @ (basis.T @ away)
        costs.append(float(away @ away))
    freedom = freedom_of(problem, colour, len(alone.theta) + len(alone.solved.coefficients))
    best = problem.solve(alone.theta, colour).cost
    return np.asarray(-0.5 * freedom * np.log(np.maximum(np.array(costs), best) / best))


def _compared(fit: Fit, drawn: Drawn, colour: Colour) -> Confronted:
    at = len(drawn.fitted.theta)  # of the gain
    fresh = internal_draws(drawn)[:, : fit.draws.shape[1]]
    size = np.hypot(_spread_of(fit.draws[:, at]), _spread_of(fresh[:, at]))
    size = float(np.copysign(size, np.median(fit.draws[:, at])))
    before, after = _straightened(fit.draws, at, size), _straightened(fresh, at, size)
    own = _robust_covariance(after)
    spread = _robust_covariance(before) + own
    difference = np.median(after, axis=0) - np.median(before, axis=0)
    distance = _distance(difference, spread)
    freedom = freedom_of(drawn.fitted.problem, colour, len(difference) + 1)
    p_value = float(fisher.sf(distance / len(difference), len(difference), freedom))
    plausible = _loaded(plausible_plants([drawn], np.ones(1), fit.operating_response, _DRAWS), drawn)
    rows = np.unique(np.linspace(0, len(before) - 1, _JOINT).astype(int))
    away = _distance(before[rows] - np.median(after, axis=0), own)
    return Confronted(
        plausible=plausible,
        p_value=p_value,
        changes=_changes(fit, fresh, difference, np.sqrt(np.diag(spread)), np.sqrt(np.diag(own))),
        noise_std=_own_residual(drawn.fitted),
        joint=_joint(fit, drawn, rows, plausible),
        joint_weights=_weights(away, len(difference), freedom),
        spread=spread,
        gain_scale=size,
        freedom=freedom,
    )


def _loaded(plausible: Plausible, drawn: Drawn) -> Plausible:
    """A drive whose friction could not hold the load that the record shows has its operating command moved by the rest.

    What friction can hold nobody sees, and it stands in the friction already.
    """
    problem = drawn.fitted.problem
    if not (problem.structure.friction and problem.drifts):
        return plausible
    at = len(drawn.fitted.theta)
    draws = drawn.draws[np.arange(len(plausible.plants)) % len(drawn.draws)]
    load = -draws[:, at + 1 + len(problem.runs)] / draws[:, at]
    beyond = np.sign(load) * np.maximum(np.abs(load) - plausible.stiction, 0.0)
    return replace(plausible, operating_command=plausible.operating_command + beyond)


def _weights(away: FloatArray, count: int, freedom: float) -> FloatArray:
    """(p,) shares of Student-t densities at these squared distances."""
    logs = -0.5 * (freedom + count) * np.log1p(away / freedom)
    weights = np.exp(logs - logs.max())
    return np.asarray(weights / weights.sum())


def _joint(fit: Fit, drawn: Drawn, rows: np.ndarray, plausible: Plausible) -> Plausible:
    """Plants of the earlier draws, in the order of the rows, about an operating command that both sides support."""
    ones = [np.concatenate([fit.draws[row], np.zeros(drawn.draws.shape[1])]) for row in rows]
    at = len(drawn.fitted.theta)
    if drawn.fitted.problem.structure.zero:
        known = fit.draws.shape[1] > at + 1
        ratio = fit.plant.numerator[0] / fit.plant.numerator[-1]
        for one, row in zip(ones, rows, strict=True):
            one[at + drawn.fitted.problem.zero_at] = fit.draws[row, at + 1] if known else ratio * fit.draws[row, at]
    commands = _common(fit.plausible.operating_command, plausible.operating_command, len(rows))
    return Plausible(
        tuple(plant_of(drawn.fitted, one) for one in ones),
        commands,
        np.array([stiction_of(drawn.fitted, one) for one in ones]),
    )


def _common(before: FloatArray, after: FloatArray, count: int) -> FloatArray:
    """(count,) operating commands, in an order that tells nothing."""
    errors = np.array([_spread_of(before), _spread_of(after)])
    middles = np.array([np.median(before), np.median(after)])
    if abs(middles[1] - middles[0]) > _MOVED * float(np.hypot(*errors)):
        middle, error = middles[1], errors[1]
    else:
        precision = 1.0 / np.maximum(errors, 1e-300) ** 2
        middle = float(np.average(middles, weights=precision)) if np.all(np.isfinite(precision)) else middles[0]
        error = float(np.min(errors)) if not np.all(np.isfinite(precision)) else 1.0 / np.sqrt(np.sum(precision))
    scores = norm.ppf((np.random.default_rng(0).permutation(count) + 0.5) / count)
    return np.asarray(middle + error * scores)


def _gain_place(changes: tuple[Change, ...]) -> int:
    """Where the gain stands: behind shapes and dead time; `changes` has one for each of the three."""
    return len(changes) - 1


def _straightened(draws: FloatArray, at: int, size: float) -> FloatArray:
    """Draws with the gain by its inverse hyperbolic sine: a logarithm where it is sure, and signed where it is not.

    A bare logarithm of the size would let a gain of the other sign pass for no change. `size` bears the sign of the
    fitted gain, so that a larger gain counts up.
    """
    out = draws.copy()
    out[:, at] = np.arcsinh(draws[:, at] / size)
    return out


def _distance(away: FloatArray, covariance: FloatArray) -> FloatArray:
    """(...,) squared distances d' C^-1 d, the columns of unlike units scaled first."""
    errors = np.sqrt(np.maximum(np.diag(covariance), 1e-300))
    scaled = away / errors
    correlation = covariance / np.outer(errors, errors) + 1e-9 * np.eye(len(errors))
    return np.asarray(np.sum(scaled * np.linalg.solve(correlation, scaled.T).T, axis=-1))


def _spread_of(gains: FloatArray) -> float:
    """Half the distance of the 16 and 84 % quantiles: a standard deviation that heavy tails don't move."""
    low, high = np.quantile(gains, [0.16, 0.84])
    return float(max(0.5 * (high - low), 1e-12 * abs(high), 1e-300))


def _robust_covariance(draws: FloatArray) -> FloatArray:
    """Covariance with heavy tails cut at the 1 and 99 % quantiles."""
    low, high = np.quantile(draws, [0.01, 0.99], axis=0)
    return np.atleast_2d(np.cov(np.clip(draws, low, high).T))


def _changes(
    fit: Fit, fresh: FloatArray, difference: FloatArray, errors: FloatArray, own: FloatArray
) -> tuple[Change, ...]:
    structure = next(s for s in CATALOGUE if s.name == fit.structure)
    shapes = len(structure.shapes)
    slowest = float(np.max(1.0 / np.maximum(np.abs(fit.plant.poles[fit.plant.poles != 0]), 1e-300), initial=0.0))
    scale = fit.plant.dead_time + slowest
    at = shapes + 1
    ratio = float(np.median(fresh[:, at]) / np.median(fit.draws[:, at]))
    scores, moved, alone = (difference / errors).tolist(), difference.tolist(), own.tolist()
    out = [Change("gain", ratio, scores[at], moved[at], alone[at])]
    lag = 1.0 + float(difference[shapes]) / scale if scale > 0 else 1.0
    out.append(Change("dead time", lag, scores[shapes], moved[shapes], alone[shapes]))
    for i, shape in enumerate(structure.shapes):
        out.append(Change(shape.name, float(np.exp(difference[i])), scores[i], moved[i], alone[i]))
    return tuple(out)


def _own_residual(alone: Fitted) -> float:
    solved = alone.problem.solve(alone.theta, WHITE)
    return float(np.sqrt(solved.cost / max(len(alone.problem.measured), 1)))
