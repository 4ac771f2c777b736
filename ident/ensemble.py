"""From draws to plausible plants, the tied structures in proportion to their evidence."""

from dataclasses import dataclass

import numpy as np

from .choose import Fitted
from .fitted import Plausible
from .noise import effective_samples
from .plant import Plant
from .polish import bounds_of
from .profile import profile_dead_time
from .regression import Regression
from .rein import rein_in
from .resample import resampled
from .run import FloatArray
from .sandwich import draw_normal
from .whiten import WHITE, Colour

# Below this Student's t has tails that no rig has: a thousand draws would hold plants from another world.
_LEAST_FREEDOM = 8.0


@dataclass(frozen=True, eq=False)
class Drawn:
    """Draws of one structure.

    Attributes
    ----------
    fitted : Fitted
    draws : (m, s + 1 + q) array
        Log shapes, dead time, gain, levels, drift rate, initial states.
    """

    fitted: Fitted
    draws: FloatArray


def draw_structure(fitted: Fitted, colour: Colour, count: int, seed: int) -> Drawn:
    """Draw from what the record leaves open about one structure.

    A whitened fit has its dead time profiled. Where plain least squares was kept (see `steady_fit`), the draws spread
    with the covariance that the coloured noise gives to it.
    """
    problem = fitted.problem
    unknowns = len(fitted.theta) + len(fitted.solved.coefficients)
    freedom = freedom_of(problem, colour, unknowns)
    s = len(fitted.theta)
    if fitted.whitened:
        profile = profile_dead_time(problem, fitted.theta, colour, freedom)
        return Drawn(fitted, resampled(problem, profile, colour, count, seed))
    draws = _about_least_squares(fitted, colour, freedom, count, seed)
    draws[:, :s] = np.clip(draws[:, :s], *bounds_of(problem))
    return Drawn(fitted, rein_in(problem, fitted.theta, draws, WHITE, freedom))


def freedom_of(problem: Regression, colour: Colour, unknowns: int) -> float:
    """Degrees of freedom that the noise's size is known with; a wandering level is known from its few waves only."""
    free = effective_samples(len(problem.measured), colour) - unknowns
    most = 2.0 * problem.wave_count if colour.wander > 0.0 else np.inf
    return float(max(min(free, most), _LEAST_FREEDOM))


def _about_least_squares(fitted: Fitted, colour: Colour, freedom: float, count: int, seed: int) -> FloatArray:
    problem = fitted.problem
    covariance = problem.least_squares_covariance(fitted.theta, fitted.solved.coefficients, colour)
    centre = np.concatenate([fitted.theta, fitted.solved.coefficients])
    draws = draw_normal(centre, covariance, freedom, count, seed)
    if problem.structure.friction:
        draws = _friction_evenly(fitted, draws)
    return _within_sample(fitted, draws) if problem.jumps else draws


def _friction_evenly(fitted: Fitted, draws: FloatArray) -> FloatArray:
    """Draws whose friction, not its logarithm, spreads evenly about the fitted one; none is below the fit's bound.

    The response changes in proportion to the friction. Where a record hardly shows it, a normal law of the logarithm
    would reach as far above it as below: to frictions that would have held the drive for half of the record.
    """
    shapes = fitted.problem.structure.shapes
    at = [i for i, shape in enumerate(shapes) if shape.kind == "command"]
    least = bounds_of(fitted.problem)[0][at]
    share = 1.0 + draws[:, at] - fitted.theta[at]
    out = draws.copy()
    out[:, at] = np.maximum(fitted.theta[at] + np.log(np.maximum(share, 1e-300)), least)
    return out


def _within_sample(fitted: Fitted, draws: FloatArray) -> FloatArray:
    """Draws with a dead time anywhere in its sample interval, the linear part moved as the fitted one would be."""
    problem, s = fitted.problem, len(fitted.theta) - 1
    before = np.ceil(fitted.theta[s] / problem.interval - 1e-6) - 1
    if before < 0:
        return draws
    shares = np.linspace(1e-3, 1.0 - 1e-3, 9)
    dead_times = (before + shares) * problem.interval
    there = [problem.solve(np.append(fitted.theta[:s], at), WHITE).coefficients for at in dead_times]
    moved = np.array(there) - problem.solve(fitted.theta, WHITE).coefficients
    share = (np.random.default_rng(0).permutation(len(draws)) + 0.5) / len(draws)
    shifts = [np.interp(share, shares, column) for column in moved.T]
    return np.column_stack(
        [draws[:, :s], (before + share) * problem.interval, draws[:, s + 1 :] + np.transpose(shifts)]
    )


def plant_of(fitted: Fitted, draw_row: FloatArray) -> Plant:
    """Plant of one draw (log shapes, dead time, gain, ...)."""
    s = len(fitted.theta) - 1
    shape = tuple(float(v) for v in np.exp(draw_row[:s]))
    numerator, denominator = fitted.problem.structure.polynomials(shape)
    gain = float(draw_row[s + 1])
    top = tuple(gain * c for c in numerator)
    if fitted.problem.structure.zero:
        top = (float(draw_row[s + 1 + fitted.problem.zero_at]), *top)
    return Plant(top, denominator, float(max(draw_row[s], 0.0)))


def internal_draws(drawn: Drawn) -> FloatArray:
    """(m, s + 2) log shapes, dead time, gain; of a structure with a zero (m, s + 3), gain times zero time last."""
    s = len(drawn.fitted.theta) - 1
    problem = drawn.fitted.problem
    zero = [s + 1 + problem.zero_at] if problem.structure.zero else []
    return np.asarray(drawn.draws[:, [*range(s + 2), *zero]])


def stiction_of(fitted: Fitted, draw_row: FloatArray) -> float:
    """Dry friction of one draw, the greater of both ways, command unit; zero where the structure has none."""
    if not fitted.problem.structure.friction:
        return 0.0
    s = len(fitted.theta) - 1
    return float(np.exp(max(draw_row[s - 2 : s])))


def operating_commands(drawn: Drawn, operating_response: float) -> FloatArray:
    """(m,) commands that hold the operating response, one a draw.

    A plant that settles: the reference plus what the level lacks over the gain, the level of one of the runs in turn,
    so that what the level does between runs is in the spread. An integrating plant: where its drift stops; one that
    friction holds: the reference, and what is between is in the friction.
    """
    problem, draws = drawn.fitted.problem, drawn.draws
    s = len(drawn.fitted.theta) - 1
    gain = draws[:, s + 1]
    runs = len(problem.runs)
    if not problem.runs:
        return np.full(len(draws), problem.reference)
    if problem.structure.integrators:
        if not problem.drifts or problem.structure.friction:
            return np.full(len(draws), problem.reference)
        return np.asarray(problem.reference - draws[:, s + 2 + runs] / gain)
    turn = np.arange(len(draws)) % runs
    level = draws[np.arange(len(draws)), s + 2 + turn]
    return np.asarray(problem.reference + (operating_response - level) / gain)


def plausible_plants(drawn: list[Drawn], weights: FloatArray, operating_response: float, count: int) -> Plausible:
    """`count` plants of all drawn structures; each has its share of the evidence, shuffled evenly."""
    shares = np.maximum(np.round(weights / weights.sum() * count).astype(int), 0)
    shares[0] += count - shares.sum()
    plants: list[tuple[float, Plant, float, float]] = []
    for item, share in zip(drawn, shares, strict=True):
        commands = operating_commands(item, operating_response)
        plants += [
            (
                (i + 0.5) / share,
                plant_of(item.fitted, item.draws[i % len(item.draws)]),
                float(commands[i % len(commands)]),
                stiction_of(item.fitted, item.draws[i % len(item.draws)]),
            )
            for i in range(share)
        ]
    plants.sort(key=lambda entry: entry[0])
    return Plausible(
        tuple(plant for _, plant, _, _ in plants),
        np.array([command for _, _, command, _ in plants]),
        np.array([friction for *_, friction in plants]),
    )
