"""Fingerprints of a long record: marks of stretches chosen by their content, so that a copy has the same."""

import numpy as np
from numpy.typing import NDArray

from ..run import FloatArray
from .copied import pair_marks, rolling_hash

STRETCH = 128  # samples
ONE_IN = np.uint64(512)
FEWEST_CHANGES = 32  # of the response in a stretch: less may be equal by chance
FEWEST = 3  # equal marks

Marks = NDArray[np.uint64]


def fingerprint(command: FloatArray, response: FloatArray) -> Marks:
    """(m,) sorted marks, about one for 512 samples, of stretches whose response moves.

    Which stretches are marked depends on nothing but their samples: wherever a copy begins and ends, it has the marks
    of what it holds. Single precision is compared, so that a conversion of units does not hide a copy.

    Parameters
    ----------
    command, response : (n,) arrays
        NaN where a sample is lost.
    """
    if len(response) < STRETCH:
        return np.empty(0, dtype=np.uint64)
    short = [values.astype(np.float32).astype(np.float64) for values in (command, response)]
    marks = rolling_hash(pair_marks(*short), STRETCH)
    mixed = (marks ^ (marks >> np.uint64(33))) * np.uint64(0xFF51AFD7ED558CCD)
    chosen = mixed % ONE_IN == 0
    moved = np.concatenate([[0], np.cumsum(np.diff(short[1]) != 0.0)])
    busy = moved[STRETCH - 1 :] - moved[: len(moved) - STRETCH + 1] >= FEWEST_CHANGES
    return np.unique(mixed[chosen & busy])


def same_origin(ours: Marks, theirs: Marks) -> bool:
    """Whether two fingerprints have stretches in common.

    A shared stretch of some 3,000 samples is found almost surely.
    """
    return bool(np.intersect1d(ours, theirs, assume_unique=True).size >= FEWEST)
