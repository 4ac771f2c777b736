"""A log taken in closed loop in which nothing but the loop itself moved the rig."""

import numpy as np
from numpy.lib.stride_tricks import sliding_window_view

from ..run import FloatArray
from .seen import BoolArray, Seen

MEMORY = 4  # samples of response and command that a controller with derivative and response filter needs
OWN = 0.02  # of the command's standard deviation: a smaller part that the response does not explain excites nothing
FEWEST = 60
AGAIN = 3  # samples at one end of the command: a clamp
OFTEN = 1.5  # times the update interval: a slower log does not show what the controller saw

ADVICE = "move the setpoint, or add steps of your own to the command, while the loop is closed"


def see_unexcited_loop(
    time: FloatArray,
    command: FloatArray,
    response: FloatArray,
    setpoint: FloatArray | None,
    unit: str,
    update_interval: float | None = None,
) -> tuple[Seen, ...]:
    """Neither the setpoint nor anything else from outside moves the command: it follows from the response.

    Such a log can't tell the plant from the inverse of the controller: both explain how response and command hang
    together. The command follows from the response where a linear law of few samples foretells it.

    Parameters
    ----------
    time : (n,) array, s
    command : (n,) array
        Finite.
    response : (n,) array
        NaN where lost.
    setpoint : (n,) array or None
        None: not logged, so that only the command itself can tell.
    unit : str
        Of the setpoint.
    update_interval : float or None, s
        Of the controller: a log taken more slowly shows a command that nothing explains, and no dither with it.

    References
    ----------
    Ljung, System Identification, chapter on closed-loop data: identifiability under feedback (from memory).
    """
    if setpoint is not None and _moves(setpoint):
        return ()
    where = f"{time[0]:.6g} s to {time[-1]:.6g} s"
    stands = "its setpoint is not logged" if setpoint is None else f"its setpoint stands at {setpoint[0]:.6g} {unit}"
    interval = float(np.median(np.diff(time))) if len(time) > 1 else 0.0
    if setpoint is not None and update_interval and interval > OFTEN * update_interval:
        size = f"{stands}, and the log is too slow to show steps added to the command ({interval:.3g} s a sample)"
        return (Seen("closed loop without excitation", where, size, ADVICE, "stops"),)
    share = unexplained_share(command, response)
    if share is None or share > OWN:
        return ()
    size = f"{stands}, and {100 * (1 - share**2):.4g} % of the command's variance follow from the response before it"
    return (Seen("closed loop without excitation", where, size, ADVICE, "stops"),)


def unexplained_share(command: FloatArray, response: FloatArray) -> float | None:
    """Standard deviation of the part of the command that no linear law of the response makes, over the command's.

    Samples at which the command stands at its lowest or highest value are left out: a clamp is no excitation.

    Returns
    -------
    float or None
        None: too few samples to tell.
    """
    if len(command) <= MEMORY:
        return None
    usable = sliding_window_view(np.isfinite(response) & ~_clamped(command), MEMORY + 1).all(axis=1)
    outputs = sliding_window_view(command, MEMORY + 1)[usable]
    inputs = sliding_window_view(response, MEMORY + 1)[usable]
    if len(outputs) < FEWEST:
        return None
    target = outputs[:, -1]
    spread = float(np.std(target))
    if spread <= 1e-12 * max(1.0, float(np.abs(target).max())):
        return None
    columns = np.column_stack([np.ones(len(target)), outputs[:, :-1], inputs])
    columns = columns - np.concatenate([[0.0], columns[:, 1:].mean(axis=0)])
    sizes = np.sqrt(np.mean(columns**2, axis=0))
    weights, *_ = np.linalg.lstsq(columns / np.where(sizes > 0, sizes, 1.0), target, rcond=1e-12)
    rest = target - columns / np.where(sizes > 0, sizes, 1.0) @ weights
    return float(np.std(rest) / spread)


def _moves(values: FloatArray) -> bool:
    finite = values[np.isfinite(values)]
    return bool(len(finite) and np.ptp(finite) > 1e-9 * max(1.0, float(np.abs(finite).max())))


def _clamped(command: FloatArray) -> BoolArray:
    """(n,) mask of samples at the lowest or highest command, where that value comes again and again."""
    mask = np.zeros(len(command), dtype=bool)
    for end in (command.min(), command.max()):
        at = command == end
        if np.count_nonzero(at) >= AGAIN:
            mask |= at
    return mask
