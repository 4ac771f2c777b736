"""Every look at one record, in the order in which they build on each other."""

from dataclasses import dataclass

import numpy as np

from ..run import FloatArray
from .clipping import see_clipping, see_declared_clipping
from .clock import see_gaps
from .dead_response import see_dead_response
from .drift import see_drift
from .idle_command import see_idle_command
from .lost import see_loss, see_spikes
from .sampling import see_slow_sampling, see_weak_excitation
from .seen import Seen
from .shape import see_coarse, see_early_end, see_few_samples, see_unsettled_start
from .stuck import see_stuck
from .swapped import see_swapped
from .tones import see_tones
from .unanswered import see_unanswered


@dataclass(frozen=True, eq=False)
class Looked:
    """A response with its lost samples taken out, and all that was seen.

    Attributes
    ----------
    response : (n,) array
        NaN where a sample is lost.
    seen : tuple of Seen
    """

    response: FloatArray
    seen: tuple[Seen, ...]


def look_at(
    time: FloatArray,
    command: FloatArray,
    response: FloatArray,
    *,
    command_unit: str,
    response_unit: str,
    before: float | None = None,
    response_range: tuple[float | None, float | None] = (None, None),
    command_range: tuple[float | None, float | None] = (None, None),
) -> Looked:
    """Look for everything that can be wrong with a record whose clock is in order.

    Parameters
    ----------
    time : (n,) array, s
        Strictly increasing.
    command : (n,) array, command unit
        Finite.
    response : (n,) array, response unit
        NaN where a sample is known to be lost.
    before : float or None, command unit
        Steady command before the record.
    response_range, command_range : (lowest, highest), each may be None
        Of the sensor and of the command's reading.
    """
    few = see_few_samples(time, response)
    if any(seen.refuses == "stops" for seen in few):
        return Looked(response, few)
    spikes = see_spikes(time, command, response, response_unit)
    mended = np.where(spikes.mask, np.nan, response)
    flat = (
        *_clipping(time, command, mended, response_unit, response_range),
        *see_stuck(time, command, mended, response_unit),
    )
    dead = see_dead_response(time, command, mended, response_unit)
    return Looked(
        mended,
        (
            *few,
            *see_gaps(time, command),
            *spikes.seen,
            *see_loss(time, mended),
            *see_idle_command(time, command, before, command_unit),
            *dead,
            *flat,
            *_command_beyond(time, command, command_unit, command_range),
            *see_coarse(mended, response_unit),
            *see_unsettled_start(time, command, mended, response_unit, before),
            *see_early_end(time, command, mended, response_unit),
            *(() if flat or dead else _relation(time, command, mended, command_unit, response_unit)),
        ),
    )


def _relation(
    time: FloatArray, command: FloatArray, response: FloatArray, command_unit: str, response_unit: str
) -> tuple[Seen, ...]:
    """What the response makes of the command; a sensor that stands still would be blamed twice."""
    return (
        *see_swapped(time, command, response),
        *see_unanswered(time, command, response, command_unit),
        *see_drift(time, command, response, response_unit),
        *see_weak_excitation(time, command, response, response_unit),
        *see_slow_sampling(time, command, response),
        *see_tones(time, command, response, response_unit),
    )


def _clipping(
    time: FloatArray, command: FloatArray, response: FloatArray, unit: str, bounds: tuple[float | None, float | None]
) -> tuple[Seen, ...]:
    declared = see_declared_clipping(time, response, *bounds, unit)
    return declared or see_clipping(time, command, response, unit)


def _command_beyond(
    time: FloatArray, command: FloatArray, unit: str, bounds: tuple[float | None, float | None]
) -> tuple[Seen, ...]:
    """Commands outside the declared range of the command, which no actuator followed."""
    low = -np.inf if bounds[0] is None else bounds[0]
    high = np.inf if bounds[1] is None else bounds[1]
    beyond = np.flatnonzero((command < low) | (command > high))
    if len(beyond) == 0:
        return ()
    where = f"{time[beyond[0]]:.6g} s to {time[beyond[-1]]:.6g} s"
    size = f"{len(beyond)} samples outside {low:g} to {high:g} {unit}"
    return (
        Seen(
            "command out of range",
            where,
            size,
            "the actuator can't have followed: log the command that was sent",
            "holds",
        ),
    )
