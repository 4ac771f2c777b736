"""Size and shape of a record: too few samples, coarse readings, an unsettled start, an early end."""

import numpy as np

from ..run import FloatArray
from .noise_level import noise_level, quantum
from .seen import Seen

FEWEST_SAMPLES = 16
FEW_SAMPLES = 40
COARSE = 0.02  # quantum over span of the response
MOST_STEPS = 10  # beyond them a record is one long excitation
UNSETTLED = 0.05  # drift before the excitation over span of the response


def see_few_samples(time: FloatArray, response: FloatArray) -> tuple[Seen, ...]:
    """Too few samples with a response."""
    count = int(np.count_nonzero(np.isfinite(response)))
    where = f"{time[0]:.6g} s to {time[-1]:.6g} s" if len(time) else "whole record"
    if count < FEWEST_SAMPLES:
        return (Seen("too few samples", where, f"{count} samples", f"log at least {FEW_SAMPLES}", "stops"),)
    if count < FEW_SAMPLES:
        return (Seen("few samples", where, f"{count} samples", "intervals will be wide: log faster or longer"),)
    return ()


def see_coarse(response: FloatArray, unit: str) -> tuple[Seen, ...]:
    """A response that takes few values."""
    good = response[np.isfinite(response)]
    levels, span, step = len(np.unique(good)), float(np.ptp(good)), quantum(good)
    if levels < 2 or step < COARSE * span:
        return ()
    size = f"steps of {step:.3g} {unit}, {levels} different values"
    return (
        Seen("coarse response", "whole record", size, "a finer range of the sensor or a larger command would help"),
    )


def see_unsettled_start(
    time: FloatArray, command: FloatArray, response: FloatArray, unit: str, before: float | None = None
) -> tuple[Seen, ...]:
    """The response drifts before the command first moves; a command that moved just before the record explains it."""
    if before is not None and before != command[0]:
        return ()
    moved = np.flatnonzero(command != command[0])
    steady = response[: moved[0]] if len(moved) else response[:0]
    steady = steady[np.isfinite(steady)]
    if len(steady) < 12:
        return ()
    third = len(steady) // 3
    drift = float(np.median(steady[-third:]) - np.median(steady[:third]))
    doubt = 4.0 * max(float(noise_level(steady)), quantum(response)) / np.sqrt(third) + quantum(response)
    if abs(drift) < max(doubt, UNSETTLED * float(np.ptp(response[np.isfinite(response)]))):
        return ()
    return (
        Seen(
            "unsettled start",
            f"{time[0]:.6g} s to {time[moved[0]]:.6g} s",
            f"drifts by {drift:.3g} {unit}",
            "wait for a steady reading before the test, or state before.command if the record begins with a step",
        ),
    )


def see_early_end(time: FloatArray, command: FloatArray, response: FloatArray, unit: str) -> tuple[Seen, ...]:
    """The record ends soon after the last step of a command that otherwise stands still."""
    moved = np.flatnonzero(np.diff(command) != 0.0)
    if len(moved) == 0 or len(moved) > MOST_STEPS:
        return ()
    after = len(command) - 1 - moved[-1]
    gaps = np.diff(np.concatenate([[0], moved]))
    if after >= min(0.1 * len(command), max(float(np.median(gaps)), 1.0)):
        return ()
    rest = time[-1] - time[moved[-1]]
    return (
        Seen(
            "early end",
            f"after the last step at {time[moved[-1]]:.6g} s",
            f"{rest:.3g} s of response",
            "log until the response has settled",
        ),
    )
