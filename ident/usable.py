"""What the runs must show before a fit of them can mean anything."""

from collections.abc import Sequence

import numpy as np

from .errors import RecordError
from .run import Run

# The largest structure on one run has eight unknowns; fewer samples than this leave nothing to tell noise by.
_FEWEST = 12


def require_usable(runs: Sequence[Run]) -> None:
    """Refuse runs of which no fit can be made.

    Raises
    ------
    RecordError
        There is no run, too few samples are left, or the command or the response never moves in any run.
    """
    if not runs:
        raise RecordError(
            "no run to fit", expected='at least one run with use = "fit"', advice="add one to the rig file"
        )
    where = ", ".join(run.label for run in runs)
    if all(np.ptp(run.command) == 0 and run.start_command == run.command[0] for run in runs):
        raise RecordError(
            "the command never moves in any fit run",
            where=where,
            found=f"command constant at {runs[0].command[0]:g}",
            expected="at least one step of the command",
            advice="record a run in which the command is stepped, and check which column is the command",
        )
    left = sum(int(run.valid.sum()) for run in runs)
    if left < _FEWEST:
        raise RecordError(
            "too few samples of the response to fit anything",
            where=where,
            found=f"{left} that are not lost",
            expected=f"at least {_FEWEST}, and some hundred for intervals that help",
            advice="record for longer, and check what marks a sample as lost",
        )
    if all(np.ptp(run.response[run.valid]) == 0 for run in runs if run.valid.any()):
        first = next(run for run in runs if run.valid.any())
        raise RecordError(
            "the response never moves in any fit run",
            where=where,
            found=f"response constant at {first.response[first.valid][0]:g}",
            expected="a response that follows the command",
            advice="check that the sensor is connected, and which column is the response",
        )
