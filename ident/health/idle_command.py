"""A command that never moves tells nothing about the plant."""

import numpy as np

from ..run import FloatArray
from .seen import Seen


def see_idle_command(time: FloatArray, command: FloatArray, before: float | None, unit: str) -> tuple[Seen, ...]:
    """The command keeps one value in the whole record, and had it before.

    Parameters
    ----------
    time : (n,) array, s
    command : (n,) array, in `unit`
    before : float or None, in `unit`
        Steady command before the record began, where it is known.
    """
    values = command if before is None else np.append(command, before)
    scale = max(float(np.abs(values).max()), 1e-300)
    if np.ptp(values) > 1e-9 * scale:
        return ()
    return (
        Seen(
            "idle command",
            f"{time[0]:.6g} s to {time[-1]:.6g} s",
            f"stands at {command[0]:.6g} {unit} in every sample",
            "move the command in the test (a step, a doublet, a sweep), or name the right source for it",
            "stops",
        ),
    )
