"""Which structure the records support: every candidate fitted, weighed under one noise model."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np

from .catalogue import CATALOGUE, RESONANCE_BEHIND_LAG, Structure
from .long_record import LongRecord, long_record
from .noise import colour_seen
from .plant import ComplexArray
from .polish import polish
from .projected import Solved
from .regression import Regression
from .run import FloatArray, Run
from .second_mode import second_modes
from .start import first_guesses
from .table_guesses import table_guesses
from .table_regression import TableRegression, Weighed
from .unexplained import unexplained
from .whiten import WHITE, Colour

Progress = Callable[[str, float], None]

# A lag shorter than this many samples can't be told from dead time.
_SHORTEST = 0.3

# A lag longer than this many records can't be told from an integrator.
_LONGEST = 8.0

# An integrating structure whose misfit is within this factor of the best may be a drive with friction.
_DRIVE = 4.0

# Above this gain of twice the log likelihood, to first order, the further structures are fitted.
_UNEXPLAINED = 6.0

# A residual under this share of the response's movement moves no gain: nothing further is looked for, and a further
# structure must lower the visible misfit by this factor (common practice, no source).
_SLIGHT = 0.01
_VISIBLY = 0.97

# The same for a mode beside a resonance, the best of some hundred tries.
_ANOTHER_MODE = 14.0

# Two modes nearer than this (logarithm of their frequencies' ratio) are one; a mode above this share of half the
# sampling frequency is hardly seen.
_SAME_MODE = 0.15
_FASTEST_MODE = 0.7

# Steps down from each first guess before only the lowest goes on.
_SCOUT = 9

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
    tail = " with zero" if structure.zero else ""
    if structure.name in ("resonance" + tail, "two lags" + tail):
        return ("two lags" if theta[1] >= 0 else "resonance") + tail
    return structure.name


def fit_candidates(
    runs: Sequence[Run],
    reference: float,
    fixed_command: bool,
    structures: Sequence[Structure] = CATALOGUE,
    progress: Progress | None = None,
    weighed: tuple[Weighed, ...] = (),
) -> tuple[list[Fitted], Colour]:
    """Every structure fitted by least squares, then all again under the noise of the best; best first.

    The further structures are fitted only where the best of the others leaves something of the command's effect (with
    tables always), and kept only where one of them is the best: what a simpler one explains as well needs no zero.
    """
    families = _families(structures)
    long = None if weighed else long_record(Regression(tuple(runs), structures[0], reference, fixed_command))
    usual = [family for family in families if not family[0].further] or families
    fitted: list[Fitted] = []
    for i, family in enumerate(usual):
        if not fitted or _may_matter(family[0], fitted):
            if progress:
                progress("fitting " + " or ".join(s.name for s in family), i / (len(families) + 1))
            fitted.append(_from_library(tuple(runs), reference, fixed_command, family, weighed, long))
    fitted = sorted(_distinct(fitted), key=lambda f: f.criterion)
    recoloured, colour = _under_one_noise(fitted)
    further = [family for family in families if family not in usual and _kin(family[0], recoloured[0])]
    left = [family for family in further if not family[0].beside]
    visible = min(f.misfit for f in fitted)
    explained = not weighed and (visible < _SLIGHT or _left_by(recoloured[0], colour) < _UNEXPLAINED)
    grown = [] if weighed or visible < _SLIGHT else _with_a_mode_more(recoloured[0], colour, structures)
    if (not left or explained) and not grown:
        return recoloured, colour
    fitted += grown
    for i, family in enumerate([] if explained else left):
        if progress:
            progress("fitting " + " or ".join(s.name for s in family), (len(usual) + i) / (len(families) + 1))
        fitted.append(_from_library(tuple(runs), reference, fixed_command, family, weighed, long))
    together, own_colour = _under_one_noise(sorted(_distinct(fitted), key=lambda f: f.criterion))
    together = [f for f in together if not _three_lags(f)]
    better = together[0].problem.structure.further and min(f.misfit for f in fitted) < _VISIBLY * visible
    if weighed and together[0].criterion > recoloured[0].criterion - _UNEXPLAINED:
        better = False  # a pole and a zero beside each other fit a few points of any table a little better
    if better or colour.wander == 0.0:
        return (together, own_colour) if better else (recoloured, colour)
    beside = [refit(f, colour) for f in fitted if f.problem.structure.further]
    return [*recoloured, *sorted(_distinct(beside), key=lambda f: f.criterion)], colour


def _with_a_mode_more(best: Fitted, colour: Colour, structures: Sequence[Structure]) -> list[Fitted]:
    """The structures that add a mode to the best one, from where its residual asks for it."""
    problem = best.problem
    grown = [s for s in structures if s.beside == best.name]
    if not grown or problem.condensed:
        return []
    ends = []
    for mode in second_modes(problem, best.theta, best.solved.coefficients, colour):
        if mode.gained < _ANOTHER_MODE:
            continue
        added = np.log([mode.frequency, mode.damping, min(abs(mode.share), 0.9)])
        added[0] -= best.theta[0]
        structure = grown[0] if mode.share > 0.0 else grown[-1]
        theta = np.concatenate([best.theta[:2], added, best.theta[2:]])
        larger = replace(problem, structure=structure)
        theta, _ = polish(larger, theta, colour)
        ends.append(_weighed(larger, *polish(larger, theta)))
    return sorted(ends, key=lambda f: f.criterion)[:1]


def _under_one_noise(fitted: list[Fitted]) -> tuple[list[Fitted], Colour]:
    """All again under the noise of the best; where that makes another the best, under its own."""
    colour = colour_of(fitted[0])
    recoloured = sorted((refit(f, colour) for f in fitted), key=lambda f: f.criterion)
    if recoloured[0].problem is not fitted[0].problem:
        colour = colour_of(recoloured[0])
        recoloured = sorted((refit(f, colour) for f in recoloured), key=lambda f: f.criterion)
    return recoloured, colour


def _kin(structure: Structure, best: Fitted) -> bool:
    """Whether the structure could be the best one with something added."""
    return best.problem.structure.integrators == structure.integrators


def _left_by(best: Fitted, colour: Colour) -> float:
    return unexplained(best.problem, best.theta, best.solved.coefficients, colour)


def _may_matter(structure: Structure, fitted: list[Fitted]) -> bool:
    """Whether a costly structure is worth a fit, judged from those before it."""
    if structure.friction:
        return _friction_may_matter(fitted)
    if structure.integrators > 1:
        times = [np.max(lags(f), initial=0.0) for f in fitted if f.problem.structure.integrators]
        return max(times, default=np.inf) > fitted[0].problem.duration
    return True


def _friction_may_matter(fitted: list[Fitted]) -> bool:
    """Whether an integrating structure comes near the best: else the plant is no drive that friction could hold."""
    integrating = [f.misfit for f in fitted if f.problem.structure.integrators]
    return min(integrating, default=np.inf) < _DRIVE * min(f.misfit for f in fitted)


def _distinct(fitted: list[Fitted]) -> list[Fitted]:
    """Without the candidates that pass for a simpler one.

    A lag shorter than the sampling can show would pass for dead time, one far longer than the record for an integrator,
    a resonance far slower than the record for two. A resonance behind a lag that does not ring is no resonance, and a
    second mode that stands on the first, or where the sampling shows no mode, is none. With a zero near it, a lag
    longer than the record is what a drift would look like.
    """
    kept = []
    for one in fitted:
        short = np.min(lags(one), initial=np.inf) < _SHORTEST * one.problem.interval
        slowest = np.min(np.abs(_moving_poles(one)), initial=np.inf)
        longest = 1.0 if one.problem.structure.zero else _LONGEST
        long = slowest * longest * one.problem.duration < 1
        if not short and not long and not _three_lags(one) and not _one_mode(one):
            kept.append(one)
    return kept or fitted


def _three_lags(fitted: Fitted) -> bool:
    return fitted.name == RESONANCE_BEHIND_LAG.name and bool(fitted.theta[1] >= 0)


def _one_mode(fitted: Fitted) -> bool:
    if not fitted.problem.structure.beside:
        return False
    poles = _moving_poles(fitted)
    apart = abs(float(fitted.theta[2]))  # of the two frequencies' logarithms
    return apart < _SAME_MODE or bool(np.max(np.abs(poles)) > _FASTEST_MODE * np.pi / fitted.problem.interval)


def lags(fitted: Fitted) -> FloatArray:
    """Time constants of the real poles away from the origin, s."""
    poles = _moving_poles(fitted)
    return np.asarray(-1.0 / poles[poles.imag == 0].real)


def _moving_poles(fitted: Fitted) -> ComplexArray:
    poles = fitted.problem.modes(fitted.problem.split(fitted.theta)[0]).poles
    return np.asarray(poles[poles.real < 0])


def colour_of(fitted: Fitted, near: Colour | None = None) -> Colour:
    """Noise colour from one candidate's residual; tables alone know none. `near`: one that can't be far from it."""
    problem = fitted.problem
    if not problem.runs:
        return WHITE
    coefficients = problem.solve(fitted.theta, Colour()).coefficients
    return colour_seen(problem.seen_about(fitted.theta, coefficients), near)


def refit(fitted: Fitted, colour: Colour) -> Fitted:
    """The same structure under another noise colour, from where it stands."""
    theta, solved = polish(fitted.problem, fitted.theta, colour, rounds=12)
    return _weighed(fitted.problem, theta, solved)


def under_white_noise(fitted: Fitted, runs: Sequence[Run]) -> Fitted:
    """The same structure by plain least squares for the same records with other commands, from where it stands."""
    own = fitted.problem
    problem = Regression(tuple(runs), own.structure, own.reference, own.fixed_command)
    return _weighed(problem, *polish(problem, fitted.theta, WHITE, rounds=12))


def steady_fit(fitted: Fitted) -> Fitted:
    """Plain least squares instead, where the whitened estimate pays for its efficiency with a worse fit.

    Under noise alone both estimates agree within their spread, and the whitened one is the sharper. When the model is
    not quite the plant the residual is coloured by the model's own error; whitening then trades the slow part of the
    record for the fast one, and the two part. Plain least squares stays near what the record shows.

    In closed loop the noise moves the command, and only the whitened estimate is free of the bias that this gives.

    References
    ----------
    Ljung, System Identification, chapter on closed-loop data: the direct method needs the noise model (from memory).
    """
    if any(run.closed_loop for run in fitted.problem.runs):
        return fitted
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
    columns = problem.at(fitted.theta).columns_under(WHITE)
    away = problem.target_under(WHITE) - fitted.solved.coefficients[0] * columns[:, 0]
    bound = [0, problem.zero_at] if problem.structure.zero else [0]
    basis, _ = np.linalg.qr(np.delete(columns, bound, axis=1))
    away = away - basis @ (basis.T @ away)
    return float(away @ away)


def evidence(fitted: Sequence[Fitted]) -> FloatArray:
    """(m,) shares of the evidence, exp(-criterion/2) normalised."""
    criteria = np.array([f.criterion for f in fitted])
    weight = np.exp(-0.5 * (criteria - criteria.min()))
    return np.asarray(weight / weight.sum())


def not_ruled_out(fitted: Sequence[Fitted], colour: Colour) -> FloatArray:
    """(m,) shares that structures have among the plausible plants; the best comes first.

    They go by the evidence. Beside a better structure a further parameter pays the price that rises with the record
    (Schwarz), but only what it gains by chance (Akaike) where the record is no judge of it: dry friction that does not
    show is still there when the gains run, and where the level wanders what the plant does slowly may have passed for
    the wandering.
    """
    fewest = min(_unknowns(f) for f in fitted)
    price = float(np.log(len(fitted[0].problem.measured))) - 2.0

    def relief(one: Fitted) -> float:
        if colour.wander > 0.0:
            return (_unknowns(one) - fewest) * price
        held = sum(shape.kind == "command" for shape in one.problem.structure.shapes)
        return held * price

    criteria = np.array([f.criterion for f in fitted])
    eased = criteria - np.array([relief(f) for f in fitted])
    if colour.wander == 0.0:
        eased[0] = criteria[0]
    weight = np.exp(-0.5 * (eased - eased.min()))
    return np.asarray(weight / weight.sum())


def _unknowns(fitted: Fitted) -> int:
    return len(fitted.theta) + len(fitted.solved.coefficients)


def _families(structures: Sequence[Structure]) -> list[list[Structure]]:
    """Structures that share a formula are fitted once, from the first guesses of all of them."""
    families: list[list[Structure]] = []
    for structure in structures:
        for family in families:
            if _formula(family[0]) == _formula(structure):
                family.append(structure)
                break
        else:
            families.append([structure])
    return families


def _formula(structure: Structure) -> tuple[object, bool, bool]:
    return structure.polynomials, structure.friction, structure.zero


def _from_library(
    runs: tuple[Run, ...],
    reference: float,
    fixed_command: bool,
    family: Sequence[Structure],
    weighed: tuple[Weighed, ...],
    long: LongRecord | None,
) -> Fitted:
    ends = []
    for structure in family:
        if long is not None:
            ends.append(long.fit(structure))
            continue
        problem = Regression(runs, structure, reference, fixed_command)
        if weighed:
            problem = TableRegression(runs, structure, reference, fixed_command, weighed)
        ends += [(problem, *polish(problem, theta, rounds=_SCOUT)) for theta in _guesses(problem)]
    problem, theta, solved = min(ends, key=lambda end: end[2].cost)
    theta, solved = polish(problem, theta)
    return _weighed(problem, theta, solved)


def _guesses(problem: Regression) -> list[FloatArray]:
    if not isinstance(problem, TableRegression):
        return first_guesses(problem)
    return [*table_guesses(problem), *(first_guesses(problem.timed) if problem.timed else [])]


def _weighed(problem: Regression, theta: FloatArray, solved: Solved) -> Fitted:
    n = len(problem.measured)
    unknowns = len(theta) + len(solved.coefficients)
    criterion = n * float(np.log(max(solved.cost, 1e-300) / n)) + unknowns * float(np.log(n))
    spread = problem.movement
    rms = problem.rms(theta, solved.coefficients)
    return Fitted(problem, theta, solved, rms / spread if spread > 0 else np.inf, criterion)
