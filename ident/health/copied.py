"""Whether two records share a stretch of samples, whatever their files are called and wherever their clocks begin."""

import numpy as np
from numpy.typing import NDArray
from scipy.signal import fftconvolve

from ..run import FloatArray
from .noise_level import noise_level, quantum
from .seen import stretches

FEWEST = 30  # samples in a row
INFORMATION = 40.0  # nats that the shared stretch must carry; exp(-40) is the chance of a false find at one place
MOST_DECIMATION = 5
CLOSE = 0.05  # of the noise: a copy that was rounded or converted
_MULTIPLIER = np.uint64(0x9E3779B97F4A7C15)
_BASE = 0xD1B54A32D192ED03


def share_stretch(
    command: FloatArray, response: FloatArray, other_command: FloatArray, other_response: FloatArray
) -> bool:
    """Whether at least 30 samples in a row, with noise in them, stand in both records.

    Equal pairs are looked for at every shift, also between a record and every second to fifth sample of the other; a
    copy with fewer digits or in other units is looked for where the noise of both fits best. A stretch counts only when
    it can't be equal by chance: each sample whose noise exceeds the resolution carries information, a constant carries
    none.

    Parameters
    ----------
    command, response : (n,) arrays
    other_command, other_response : (m,) arrays
        NaN where a sample is lost.
    """
    if np.count_nonzero(np.isin(pair_marks(command, response), pair_marks(other_command, other_response))) < FEWEST:
        return _alike(response, other_response)
    for step in range(1, MOST_DECIMATION + 1):
        for phase in range(step):
            thinned = slice(phase, None, step)
            if _equal(command[thinned], response[thinned], other_command, other_response):
                return True
            if step > 1 and _equal(command, response, other_command[thinned], other_response[thinned]):
                return True
    return _alike(response, other_response)


def _equal(command: FloatArray, response: FloatArray, other_command: FloatArray, other_response: FloatArray) -> bool:
    if min(len(response), len(other_response)) < FEWEST:
        return False
    ours = rolling_hash(pair_marks(command, response))
    theirs = rolling_hash(pair_marks(other_command, other_response))
    covered = np.zeros(len(response), dtype=bool)
    for index in np.flatnonzero(np.isin(ours, theirs)):
        covered[index : index + FEWEST] = True
    bits = _information(response)
    return any(
        (end - start) * bits >= INFORMATION and np.ptp(response[start:end]) > 0.0
        for start, end in stretches(covered)
        if np.isfinite(response[start:end]).all()
    )


def _information(response: FloatArray) -> float:
    """Nats that one equal sample carries: minus the log of the chance that noise alone repeats it.

    From the second differences, whose noise is sqrt(6) that of a sample.
    """
    second = np.diff(response[np.isfinite(response)], 2)
    if len(second) < FEWEST:
        return 0.0
    step = max(quantum(response), 1e-300)
    _, counts = np.unique(np.round(second / step), return_counts=True)
    chance = float(np.sum(counts * (counts - 1.0)) / (len(second) * (len(second) - 1.0)))
    return max(0.0, min(10.0, float(-np.log(max(chance, 1e-6)) - 0.5 * np.log(6.0))))


def pair_marks(command: FloatArray, response: FloatArray) -> NDArray[np.uint64]:
    """(n,) one mark a pair; the last bits are left out, where a conversion of units may differ."""
    with np.errstate(over="ignore"):
        return _bits(command) * _MULTIPLIER ^ _bits(response)


def _bits(values: FloatArray) -> NDArray[np.uint64]:
    clean = np.where(np.isfinite(values), values, 0.0) + 0.0
    bits = np.ascontiguousarray(clean).view(np.uint64)
    with np.errstate(over="ignore"):
        mixed = (bits ^ (bits >> np.uint64(31))) * _MULTIPLIER
        return np.asarray(mixed ^ (mixed >> np.uint64(29)), dtype=np.uint64)


def rolling_hash(marks: NDArray[np.uint64], length: int = FEWEST) -> NDArray[np.uint64]:
    """(n - length + 1,) hash of each `length` marks in a row, modulo 2^64."""
    count = len(marks)
    inverse = pow(_BASE, -1, 2**64)
    with np.errstate(over="ignore"):
        powers = np.cumprod(np.full(count, _BASE, dtype=np.uint64))
        back = np.cumprod(np.full(count, inverse, dtype=np.uint64))
        sums = np.concatenate([np.zeros(1, dtype=np.uint64), np.cumsum(marks * powers, dtype=np.uint64)])
        return np.asarray((sums[length:] - sums[:-length]) * back[: count - length + 1], dtype=np.uint64)


def _alike(response: FloatArray, other: FloatArray) -> bool:
    """A copy that is equal but for rounding, scale and offset, at the shift where the records' noise fits best."""
    ours, theirs = _roughness(response), _roughness(other)
    if min(len(ours), len(theirs)) < FEWEST or not ours.any() or not theirs.any():
        return False
    fit = np.abs(fftconvolve(ours, theirs[::-1]))
    shift = int(np.argmax(fit)) - (len(theirs) - 1)
    start, end = max(0, shift), min(len(response), shift + len(other))
    if end - start < FEWEST:
        return False
    mine, copy = response[start:end], other[start - shift : end - shift]
    good = np.isfinite(mine) & np.isfinite(copy)
    if np.count_nonzero(good) < FEWEST or np.ptp(copy[good]) == 0.0:
        return False
    slope, level = np.polyfit(copy[good], mine[good], 1)
    noise = noise_level(mine)
    if noise <= 3.0 * quantum(mine) and noise <= 3.0 * abs(slope) * quantum(copy):
        return False
    near = good & (np.abs(mine - slope * np.where(good, copy, 0.0) - level) <= CLOSE * noise)
    return any(last - first >= FEWEST for first, last in stretches(near))


def _roughness(values: FloatArray) -> FloatArray:
    """(n - 2,) second differences, limited to a few deviations so that steps don't outweigh the noise."""
    if len(values) < FEWEST:
        return np.zeros(0)
    filled = np.where(np.isfinite(values), values, np.nanmedian(values))
    second = np.diff(filled, 2)
    most = 4.0 * float(np.median(np.abs(second)))
    return np.clip(second, -most, most)
