"""How far each requirement and limit is from its bound, as shares of the bound; negative when it is passed."""

import numpy as np

from ..ident.run import FloatArray
from .requirements import Requirement
from .situation import Situation
from .values import Values

NEVER = -8.0  # slack of what is not reached at all
UNSTABLE = -10.0
_FAR = -2.0  # below it the slack grows by its logarithm only, so that far misses can still be told apart
_LEAST_SCALE = {"overshoot": 0.03, "steady_state_error": 1e-12}


def requirement_slack(item: Requirement, value: FloatArray) -> FloatArray:
    """(c,) normalised distance to the bound: 0 on it, 1 at the best that can be.

    Examples
    --------
    >>> requirement_slack(Requirement("settling_time", 2.0, "at_most", "s"), np.array([1.0, 3.0]))
    array([ 0.5, -0.5])
    """
    scale = max(abs(item.limit), _LEAST_SCALE.get(item.name, 1e-12))
    away = item.limit - value if item.sense == "at_most" else value - item.limit
    known = np.isfinite(away)
    share = np.where(known, away, 0.0) / scale
    graded = np.where(share < _FAR, _FAR - np.log1p(np.maximum(_FAR - share, 0.0)), share)
    return np.where(known, np.maximum(graded, NEVER), np.where(away > 0, 10.0, NEVER))


def meets(item: Requirement, value: FloatArray) -> np.ndarray:
    """(c,) bool: whether the bound is kept, exactly as stated."""
    return value <= item.limit if item.sense == "at_most" else value >= item.limit


def requirement_slacks(values: Values, situation: Situation) -> FloatArray:
    """(items, c) slacks in the order of `situation.items`; a value that nobody could compute counts as never."""
    count = values.stable.size
    rows = [requirement_slack(item, values.of.get(item.name, np.full(count, np.nan))) for item in situation.items]
    return np.where(values.stable, np.array(rows).reshape(len(rows), count), UNSTABLE)


def limit_slacks(values: Values, situation: Situation) -> dict[str, FloatArray]:
    """Limits of the response and its rate; the command's are kept by the clamp."""
    limits, span = situation.limits, max(abs(situation.step), 1e-12)
    found: dict[str, FloatArray] = {}
    for name, bound, scale, sign in (
        ("response highest", limits.response_highest, span, 1.0),
        ("response lowest", limits.response_lowest, span, -1.0),
        ("response rate", limits.response_rate, limits.response_rate, 1.0),
    ):
        if bound is None or scale is None or not np.isfinite(bound) or name not in values.extremes:
            continue
        slack = sign * (bound - values.extremes[name]) / max(scale, 1e-300)
        found[name] = np.where(values.stable, np.nan_to_num(slack, nan=NEVER), UNSTABLE)
    return found
