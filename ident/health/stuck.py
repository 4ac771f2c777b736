"""A sensor that freezes: readings that stand still inside the record of a noisy signal."""

import numpy as np

from ..run import FloatArray
from .noise_at_rest import no_chance, surely_noisy
from .seen import Seen, stretches

LONG = 20  # samples in a row


def see_stuck(time: FloatArray, command: FloatArray, response: FloatArray, unit: str) -> tuple[Seen, ...]:
    """Long flat stretches between the extremes of a signal that is noisy at rest elsewhere.

    Parameters
    ----------
    time : (n,) array, s
    command : (n,) array
    response : (n,) array, in `unit`; NaN is left out
    """
    good = np.isfinite(response)
    if np.count_nonzero(good) < 2 * LONG or np.ptp(response[good]) == 0.0:
        return ()
    time, command, response = time[good], command[good], response[good]
    equal = np.concatenate([[False], np.diff(response) == 0.0])
    runs = [(first - 1, last) for first, last in stretches(equal) if last - first >= LONG]
    inner = [(first, last) for first, last in runs if response.min() < response[first] < response.max()]
    flat = np.zeros(len(response), dtype=bool)
    for first, last in inner:
        flat[first:last] = True
    if not inner or not surely_noisy(command, response, flat):
        return ()
    if not no_chance(response, flat, max(last - first - 1 for first, last in inner)):
        return ()
    size = f"{np.count_nonzero(flat)} samples, {max(last - first for first, last in inner)} in a row at most"
    where = f"{time[inner[0][0]]:.6g} s to {time[inner[-1][1] - 1]:.6g} s"
    return (
        Seen(
            "stuck response",
            where,
            size,
            f"the reading stands at {response[inner[0][0]]:.6g} {unit}: check the "
            "sensor, or use the part before or after it (from, to)",
            "holds",
        ),
    )
