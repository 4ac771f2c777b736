"""What a log taken in closed loop says before anything is fitted."""

from collections.abc import Sequence

import numpy as np

from .run import Run

FEWEST = 5


def resting_response(runs: Sequence[Run]) -> float | None:
    """Mean response, response unit, of the stretch before the setpoint of the first run moves.

    In closed loop the command is never steady, so that its first sample says less about where the rig stood than this.

    Returns
    -------
    float or None
        None: the first run was not taken in closed loop, its setpoint is not known, or it moves from the start.
    """
    first = runs[0]
    if not first.closed_loop or first.setpoint is None:
        return None
    moved = np.flatnonzero(first.setpoint != first.setpoint[0])
    rest = first.response[: int(moved[0]) if len(moved) else len(first.time)]
    rest = rest[np.isfinite(rest)]
    return float(np.mean(rest)) if len(rest) >= FEWEST else None
