"""Looks for a gain that differs along the command: the plant fitted again behind curves of several bends."""

import numpy as np
from scipy.optimize import minimize_scalar

from .bend import Bend, bent
from .choose import Fitted, colour_of, refit, under_white_noise
from .table_regression import TableRegression
from .whiten import Colour

# A bend is tried at this share of the command's span; the curve must keep rising over what the records cover.
_TRIED = 0.05
_MOST = 0.45

# First estimate of the gain of twice the log likelihood from which the bend is looked at with the noise fitted again.
_WORTH = 6.0

# A gain that differs by less than this, either way from the middle of the command's span, moves no gain, and a bend
# must lower the visible misfit by this factor (common practice, no source; both chosen with a record of a passive
# circuit in view, which shows a gain that differs by 2 to 3 % and a misfit that falls by 2 %).
_SLIGHT = 0.03
_VISIBLY = 0.97

# More samples than this are fitted without a bend: each of its sizes needs a fit.
_LONGEST = 400_000

# Share of the largest bend at which the curvature of the loss is taken.
_CURVED = 0.02


def find_bend(plain: Fitted, colour: Colour) -> Bend | None:
    """The bend that the records show before the plant; None where a straight plant explains them as well.

    Parameters
    ----------
    plain : Fitted
        The best structure for the commands as logged.
    colour : Colour
        Of its noise.

    Notes
    -----
    Two levels of the command can't tell a bend from a gain: then the loss is flat, and none is found. Weighed by the
    Bayesian information criterion, each size with the plant and the noise's colour fitted again.
    """
    if not _can_be_asked(plain):
        return None
    runs, reference = plain.problem.runs, plain.problem.reference
    reach = max(float(np.max(np.abs(np.append(run.command, run.start_command) - reference))) for run in runs)

    def at(share: float) -> Fitted:
        return under_white_noise(plain, [bent(run, reference, share / reach) for run in runs])

    def first(share: float) -> float:
        return _loss(refit(at(share), colour), colour)

    low, middle, high = first(-_TRIED), first(0.0), first(_TRIED)
    curvature = (low + high - 2.0 * middle) / _TRIED**2
    slope = (high - low) / (2.0 * _TRIED)
    if curvature <= 0.0 or slope**2 / (2.0 * curvature) < _WORTH:
        return None

    def loss(share: float) -> float:
        fitted = at(share)
        own = colour_of(fitted, colour)
        return _loss(refit(fitted, own), own)

    straight = loss(0.0)
    guess = float(np.clip(-slope / curvature, -0.8 * _MOST, 0.8 * _MOST))
    ends = np.clip([0.3 * guess, 1.7 * guess], -_MOST, _MOST)
    around = (float(ends.min()), float(ends.max()))
    found = minimize_scalar(loss, bounds=around, method="bounded", options={"xatol": 2e-3, "maxiter": 12})
    share, best = float(found.x), float(found.fun)
    sureness = straight - best
    half = 0.5 * max(float(np.ptp(np.append(run.command, run.start_command))) for run in runs)
    slight = 2.0 * abs(share) * half / reach < _SLIGHT or at(share).misfit > _VISIBLY * at(0.0).misfit
    if slight or sureness < float(np.log(len(plain.problem.measured))):
        return None
    steep = (loss(share - _CURVED) + loss(share + _CURVED) - 2.0 * best) / _CURVED**2
    error = float(np.sqrt(2.0 / steep)) if steep > 0.0 else abs(share)
    return Bend(reference, share / reach, error / reach, reach, sureness)


def _loss(fitted: Fitted, colour: Colour) -> float:
    """-2 log likelihood up to a constant."""
    problem = fitted.problem
    cost = problem.solve(fitted.theta, colour).cost
    return float(len(problem.measured) * np.log(max(cost, 1e-300)) + problem.whitener(colour).log_determinant)


def _can_be_asked(plain: Fitted) -> bool:
    problem = plain.problem
    if isinstance(problem, TableRegression) or not problem.runs or any(run.closed_loop for run in problem.runs):
        return False
    if problem.structure.friction or problem.jumps or problem.structure.integrators > 1:
        return False
    return sum(len(run.time) for run in problem.runs) <= _LONGEST
