"""Whether a signal is noisy where nothing moves it, so that standing still tells something."""

import numpy as np

from ..run import FloatArray
from .noise_level import quantum
from .seen import BoolArray

FEWEST = 40  # samples to judge by
WINDOW = 20  # neighbours in which the densest equals are looked for
LEAST_CHANCE = 0.02
FALSE_FINDS = 1e-6  # wished chance of a false finding in one record
QUIET = 4  # samples for which the command has stood still
SURELY_TURNING = 0.6
TURNING = 0.2  # share of the samples at which the signal turns: white noise 2/3, a smooth signal hardly any


def no_chance(response: FloatArray, left_out: BoolArray, pairs: int) -> bool:
    """Whether so many equal neighbours can't be chance, by their share in the densest stretch elsewhere.

    Parameters
    ----------
    response : (n,) array
    left_out : (n,) mask
        The samples that are judged, not to be counted as elsewhere.
    pairs : int
        Equal neighbours among them.
    """
    equal = (np.diff(response) == 0.0)[~(left_out[1:] & left_out[:-1])]
    if len(equal) < FEWEST:
        return False
    chance = float(np.clip(1.5 * _densest(equal), LEAST_CHANCE, 1.0))
    return bool(pairs * np.log(1.0 / chance) > np.log(len(response) / FALSE_FINDS))


def _densest(equal: BoolArray) -> float:
    """Largest share of equal neighbours in any short stretch."""
    width = min(WINDOW, len(equal))
    return float(np.convolve(equal, np.ones(width) / width, mode="valid").max())


def noisy_at_rest(command: FloatArray, response: FloatArray, at: BoolArray) -> bool:
    """Whether the response turns again and again while the command stands still, away from both ends."""
    inside = _quiet(command, at, 2)
    steps = np.diff(response)
    turning = (steps[:-1] * steps[1:])[inside] < 0.0
    return len(turning) >= FEWEST // 2 and bool(np.mean(turning) > TURNING)


def surely_noisy(command: FloatArray, response: FloatArray, at: BoolArray) -> bool:
    """The same for third differences beyond rounding, which turn at four of five samples of noise.

    Those of a ringing of more than 3.4 samples a period turn at fewer than 0.6 of them; rounding alone stays within
    four quanta.
    """
    inside = _quiet(command, at, 4)
    third = np.diff(response, 3)
    real = np.abs(third) > 4.0 * quantum(response)
    turning = ((third[:-1] * third[1:] < 0.0) & real[:-1] & real[1:])[inside]
    return len(turning) >= FEWEST // 2 and bool(np.mean(turning) > SURELY_TURNING)


def _quiet(command: FloatArray, at: BoolArray, reach: int) -> BoolArray:
    """(n - reach,) mask of the stretches of reach + 1 samples with a steady command and no sample at an end."""
    moved = np.concatenate([[False], np.diff(command) != 0.0])
    standing = np.convolve(moved, np.ones(QUIET), mode="full")[: len(command)] == 0
    away = np.convolve(at, np.ones(reach + 1), mode="valid") == 0
    return np.asarray(standing[reach:] & away)
