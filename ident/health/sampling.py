"""A record that is too slow for its rig, or whose command moves the response hardly more than noise does."""

from itertools import pairwise

import numpy as np

from ..run import FloatArray
from .noise_level import noise_level, quantum
from .rests import Rest, rests
from .seen import Seen

AT_ONCE = 0.7  # of the whole answer within one sample
CLEAR = 30.0  # deviations of the noise
WEAK = 8.0  # standard errors between the readings of two rests
MOSTLY_NOISE = 8.0  # deviations that the readings of a rest span at most when noise is all that moves them


def see_slow_sampling(time: FloatArray, command: FloatArray, response: FloatArray) -> tuple[Seen, ...]:
    """Answers to steps that are over within one sample.

    Parameters
    ----------
    time : (n,) array, s
    command : (n,) array
    response : (n,) array
        NaN where lost.
    """
    level = max(noise_level(response), quantum(response))
    found = rests(command, response)
    shares = [share for before, after in pairwise(found) if (share := _share_at_once(before, after, level)) is not None]
    if len(shares) < 2 or float(np.median(shares)) < AT_ONCE:
        return ()
    interval = float(np.median(np.diff(time)))
    return (
        Seen(
            "slow sampling",
            "whole record",
            f"{100 * float(np.median(shares)):.2g} % of a step's answer within one sample of {interval:.3g} s",
            "log faster: the lag and the dead time can't be told from each other",
        ),
    )


def _share_at_once(before: Rest, after: Rest, level: float) -> float | None:
    """Largest change in one sample over the whole answer; None where the answer is unclear or still going on."""
    if before.last != after.first or len(before.end) < 2 or len(after.end) < 2:
        return None
    whole = float(np.median(after.end) - np.median(before.end))
    if abs(whole) < CLEAR * level or not after.is_flat(0.05 * abs(whole)):
        return None
    steps = np.diff(np.concatenate([before.end[-1:], after.response[np.isfinite(after.response)]]))
    return float(np.max(np.sign(whole) * steps) / abs(whole))


def see_weak_excitation(time: FloatArray, command: FloatArray, response: FloatArray, unit: str) -> tuple[Seen, ...]:
    """Readings at different commands that differ by hardly more than their noise.

    Parameters
    ----------
    time : (n,) array, s
    command : (n,) array
    response : (n,) array, in `unit`
        NaN where lost.
    """
    ends = [rest.end for rest in rests(command, response) if len(rest.end) >= 5]
    if len(ends) < 2:
        return ()
    means = np.array([end.mean() for end in ends])
    error = float(np.sqrt(np.mean([np.var(end) / len(end) for end in ends])))
    moved = float(np.ptp(means))
    inside = float(np.median([np.ptp(end) for end in ends]))
    if moved > WEAK * error or moved > inside or inside > MOSTLY_NOISE * noise_level(response):
        return ()
    return (
        Seen(
            "weak excitation",
            f"{time[0]:.6g} s to {time[-1]:.6g} s",
            f"the command moves the reading by {moved:.3g} {unit}, its noise spans {inside:.3g} {unit}",
            "use a larger command, or hold each level longer",
        ),
    )
