"""Hardware limits against the worst plausible plant."""

import numpy as np

from .designed import LimitJudged
from .judge import PlantVerdicts
from .situation import Situation

_ROUNDING = 1e-9


def judged_limits(
    verdicts: PlantVerdicts, situation: Situation, command_unit: str, response_unit: str
) -> tuple[LimitJudged, ...]:
    """One entry for each finite limit that was given; none where no step was stated to judge them by."""
    limits = situation.limits
    if not verdicts.extremes:
        return ()
    table = (
        ("command lowest", limits.command_lowest, command_unit, False),
        ("command highest", limits.command_highest, command_unit, True),
        ("command rate", limits.command_rate, f"{command_unit}/s", True),
        ("response lowest", limits.response_lowest, response_unit, False),
        ("response highest", limits.response_highest, response_unit, True),
        ("response rate", limits.response_rate, f"{response_unit}/s", True),
    )
    return tuple(
        _judged(name, bound, unit, highest, verdicts)
        for name, bound, unit, highest in table
        if bound is not None and np.isfinite(bound)
    )


def _judged(name: str, bound: float, unit: str, highest: bool, verdicts: PlantVerdicts) -> LimitJudged:
    reached = verdicts.extremes.get(name, np.array([np.nan]))
    known = reached[np.isfinite(reached)]
    lost = not verdicts.stable.all() and not name.startswith("command")
    if known.size == 0 or lost:
        return LimitJudged(name, bound, np.inf if highest else -np.inf, unit, -np.inf, False)
    worst = float(known.max() if highest else known.min())
    headroom = bound - worst if highest else worst - bound
    return LimitJudged(name, bound, worst, unit, headroom, bool(headroom >= -_ROUNDING * max(abs(bound), 1.0)))


def limit_cautions(situation: Situation) -> tuple[str, ...]:
    """What must be said loudly when a limit was not given."""
    limits = situation.limits
    said = []
    if situation.step == 0.0:
        said.append("NO TEST STEP WAS STATED: THE LIMITS OF COMMAND AND RESPONSE WERE NOT CHECKED BY A STEP")
    if limits.command_lowest is None or limits.command_highest is None:
        said.append("NO COMMAND LIMITS WERE GIVEN: THE LAW HAS NO CLAMP, AND NOTHING HERE KEEPS THE ACTUATOR SAFE")
    if limits.response_lowest is None or limits.response_highest is None:
        said.append("NO LIMITS OF THE RESPONSE WERE GIVEN: OVERTRAVEL WAS NOT CHECKED")
    return tuple(said)
