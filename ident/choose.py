"""Which structure the records support: every candidate fitted, weighed under one noise model."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np

from .catalogue import CATALOGUE, Structure
from .noise import estimate_colour
from .polish import polish
from .regression import Regression, Solved
from .run import FloatArray, Run
from .start import first_guesses
from .whiten import WHITE, Colour

Progress = Callable[[str, float], None]

# A lag shorter than this many samples can't be told from dead time.
_SHORTEST = 0.3

# A lag longer than this many records can't be told from an integrator.
_LONGEST = 8.0

# An integrating structure whose misfit is within this factor of the best may be a drive with friction.
_DRIVE = 4.0

# Rise of the plain sum of squares that a whitened estimate may cost.
_TRADE = 0.02
_TRADE_WITH_GAIN = 0.1


@dataclass(frozen=True, eq=False)
class Fitted:
    """One structure at the bottom of its valley.

    Attributes
    ----------
    problem : Regression
    theta : (s + 1,) array
    solved : Solved
        Under the colour it was last fitted with.
    misfit : float
        Unwhitened rms residual / standard deviation of the response.
    criterion : float
    whitened : bool
        False where plain least squares was kept because whitening would have cost too much of the visible fit.
    """

    problem: Regression
    theta: FloatArray
    solved: Solved
    misfit: float
    criterion: float
    whitened: bool = True

    @property
    def name(self) -> str:
        """The structure's name; one formula is two structures, told apart by its damping ratio."""
        return name_of(self.problem.structure, self.theta)


def name_of(structure: Structure, theta: FloatArray) -> str:
    """Name that these values deserve: a second order is a resonance below damping ratio one, else two lags."""
    if structure.name in ("resonance", "two lags"):
        return "two lags" if theta[1] >= 0 else "resonance"
    return structure.name


def fit_candidates(
    runs: Sequence[Run],
    reference: float,
    fixed_command: bool,
    structures: Sequence[Structure] = CATALOGUE,
    progress: Progress | None = None,
) -> tuple[list[Fitted], Colour]:
    """Every structure fitted by least squares, then all again under the noise of the best; best first."""
    fitted: list[Fitted] = []
    for i, family in enumerate(_families(structures)):
        if fitted and family[0].friction and not _friction_may_matter(fitted):
            continue
        if progress:
            progress("fitting " + " or ".join(s.name for s in family), i / (len(structures) + 1))
        fitted.append(_from_library(tuple(runs), reference, fixed_command, family))
    fitted = sorted(_distinct(fitted), key=lambda f: f.criterion)
    colour = colour_of(fitted[0])
    recoloured = sorted((refit(f, colour) for f in fitted), key=lambda f: f.criterion)
    if recoloured[0].problem is not fitted[0].problem:
        colour = colour_of(recoloured[0])
        recoloured = sorted((refit(f, colour) for f in recoloured), key=lambda f: f.criterion)
    return recoloured, colour


def _friction_may_matter(fitted: list[Fitted]) -> bool:
    """Whether an integrating structure comes near the best: else the plant is no drive that friction could hold."""
    integrating = [f.misfit for f in fitted if f.problem.structure.integrators]
    return min(integrating, default=np.inf) < _DRIVE * min(f.misfit for f in fitted)


def _distinct(fitted: list[Fitted]) -> list[Fitted]:
    """Without the candidates that pass for a simpler one.

    A lag shorter than the sampling can show would pass for dead time, one far longer than the record for an integrator.
    """
    kept = []
    for one in fitted:
        times = lags(one)
        short = np.min(times, initial=np.inf) < _SHORTEST * one.problem.interval
        long = np.max(times, initial=0.0) > _LONGEST * one.problem.duration
        if not short and not long:
            kept.append(one)
    return kept or fitted


def lags(fitted: Fitted) -> FloatArray:
    """Time constants of the real poles away from the origin, s."""
    poles = fitted.problem.modes(fitted.problem.split(fitted.theta)[0]).poles
    real = poles[(poles.imag == 0) & (poles.real < 0)]
    return np.asarray(-1.0 / real.real)


def colour_of(fitted: Fitted) -> Colour:
    """Noise colour from one candidate's residual."""
    problem = fitted.problem
    coefficients = problem.solve(fitted.theta, Colour()).coefficients
    model, columns = problem.full_columns(fitted.theta, coefficients)
    return estimate_colour(columns, problem.measured - model, problem.stretches, problem.waves)


def refit(fitted: Fitted, colour: Colour) -> Fitted:
    """The same structure under another noise colour, from where it stands."""
    theta, solved = polish(fitted.problem, fitted.theta, colour, rounds=12)
    return _weighed(fitted.problem, theta, solved)


def steady_fit(fitted: Fitted) -> Fitted:
    """Plain least squares instead, where the whitened estimate pays for its efficiency with a worse fit.

    Under noise alone both estimates agree within their spread, and the whitened one is the sharper. When the model is
    not quite the plant the residual is coloured by the model's own error; whitening then trades the slow part of the
    record for the fast one, and the two part. Plain least squares stays near what the record shows.
    """
    problem = fitted.problem
    at_whitened = problem.solve(fitted.theta, WHITE).cost
    theta, solved = polish(problem, fitted.theta, WHITE)
    with_its_gain = _cost_with_gain(problem, fitted)
    if at_whitened <= (1 + _TRADE) * solved.cost and with_its_gain <= (1 + _TRADE_WITH_GAIN) * solved.cost:
        return fitted
    plain = _weighed(problem, theta, solved)
    return replace(plain, criterion=fitted.criterion, whitened=False)


def _cost_with_gain(problem: Regression, fitted: Fitted) -> float:
    """Plain sum of squares of a whitened estimate with its own gain; levels, drift and initial states free."""
    shape, dead_time = problem.split(fitted.theta)
    initial = problem.initial_columns(shape)
    free = problem.fixed_columns if initial is None else np.column_stack([problem.fixed_columns, initial])
    away = problem.measured - fitted.solved.coefficients[0] * problem.unit_response(shape, dead_time)
    basis, _ = np.linalg.qr(free)
    away = away - basis @ (basis.T @ away)
    return float(away @ away)


def evidence(fitted: Sequence[Fitted]) -> FloatArray:
    """(m,) shares of the evidence, exp(-criterion/2) normalised."""
    criteria = np.array([f.criterion for f in fitted])
    weight = np.exp(-0.5 * (criteria - criteria.min()))
    return np.asarray(weight / weight.sum())


def _families(structures: Sequence[Structure]) -> list[list[Structure]]:
    """Structures that share a formula are fitted once, from the first guesses of all of them."""
    families: list[list[Structure]] = []
    for structure in structures:
        for family in families:
            if family[0].polynomials is structure.polynomials and family[0].friction == structure.friction:
                family.append(structure)
                break
        else:
            families.append([structure])
    return families


def _from_library(runs: tuple[Run, ...], reference: float, fixed_command: bool, family: Sequence[Structure]) -> Fitted:
    ends = []
    for structure in family:
        problem = Regression(runs, structure, reference, fixed_command)
        ends += [(problem, *polish(problem, theta)) for theta in first_guesses(problem)]
    problem, theta, solved = min(ends, key=lambda end: end[2].cost)
    return _weighed(problem, theta, solved)


def _weighed(problem: Regression, theta: FloatArray, solved: Solved) -> Fitted:
    n = len(problem.measured)
    unknowns = len(theta) + len(solved.coefficients)
    criterion = n * float(np.log(max(solved.cost, 1e-300) / n)) + unknowns * float(np.log(n))
    model, _ = _model(problem, theta, solved)
    spread = float(np.std(problem.measured))
    rms = float(np.sqrt(np.mean((problem.measured - model) ** 2)))
    return Fitted(problem, theta, solved, rms / spread if spread > 0 else np.inf, criterion)


def _model(problem: Regression, theta: FloatArray, solved: Solved) -> tuple[FloatArray, FloatArray]:
    shape, dead_time = problem.split(theta)
    lead = problem.unit_response(shape, dead_time)
    r = problem.fixed_columns.shape[1]
    model = lead * solved.coefficients[0] + problem.fixed_columns @ solved.coefficients[1 : 1 + r]
    initial = problem.initial_columns(shape)
    if initial is not None:
        model = model + initial @ solved.coefficients[1 + r :]
    return model, lead
