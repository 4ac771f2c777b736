"""A sensor at the end of its range: readings that stand still at the record's highest or lowest value."""

from dataclasses import dataclass

import numpy as np

from ..run import FloatArray
from .noise_level import quantum
from .seen import BoolArray, Seen, stretches

QUIET_SAMPLES = 4  # the command has stood still for this long where noise is looked at
FEWEST_TRIPLES = 20
TURNING_OF_NOISE = 0.35  # white noise turns at 2/3 of its samples, a smooth signal hardly ever
STEEP = 4.0  # quanta from sample to sample
CHANCE = 1e-6  # of a false finding in one record
_SECOND_DIFFERENCE = 0.6744897501960817 * np.sqrt(6.0)  # median |second difference| of white noise of unit deviation


@dataclass(frozen=True)
class _End:
    """One end of the record: its value, its name, and where it is reached."""

    value: float
    name: str
    at: BoolArray


def see_declared_clipping(
    time: FloatArray, response: FloatArray, lowest: float | None, highest: float | None, unit: str
) -> tuple[Seen, ...]:
    """Samples at or beyond a declared end of the sensor's range, two in a row at least.

    Parameters
    ----------
    time : (n,) array, s
    response : (n,) array, in `unit`
    lowest, highest : float or None, in `unit`
    """
    margin = 1e-6 * (highest - lowest) if lowest is not None and highest is not None else 0.0
    found: list[Seen] = []
    with np.errstate(invalid="ignore"):
        if highest is not None:
            found += _declared(
                time, response >= highest - margin, f"at the sensor's highest reading {highest:g} {unit}"
            )
        if lowest is not None:
            found += _declared(time, response <= lowest + margin, f"at the sensor's lowest reading {lowest:g} {unit}")
    return tuple(found)


def _declared(time: FloatArray, at: BoolArray, words: str) -> list[Seen]:
    runs = [(start, end) for start, end in stretches(at) if end - start >= 2]
    return [_seen(time, runs, words)] if runs else []


def _seen(time: FloatArray, runs: list[tuple[int, int]], words: str) -> Seen:
    count = sum(end - start for start, end in runs)
    return Seen(
        "clipping",
        f"{time[runs[0][0]]:.6g} s to {time[runs[-1][1] - 1]:.6g} s",
        f"{count} samples {words}",
        "repeat the run with a smaller command, or cut it before with from and to: the true response is unknown there",
        "holds",
    )


def see_clipping(time: FloatArray, command: FloatArray, response: FloatArray, unit: str) -> tuple[Seen, ...]:
    """Flat stretches at an extreme of a signal that is noisy elsewhere.

    Two samples of a steady signal with noise sigma and quantum q read the same with chance q/(2 sqrt(pi) sigma). The
    equal neighbours at the extreme are counted against that chance. A signal whose noise is below its quantum is flat
    for that reason, and nothing is said about it; nor about a flat start, where a rig without noise may have rested.

    Parameters
    ----------
    time : (n,) array, s
    command : (n,) array
    response : (n,) array, in `unit`; NaN is left out
    """
    good = np.isfinite(response)
    if np.count_nonzero(good) < 2 * FEWEST_TRIPLES or np.ptp(response[good]) == 0.0:
        return ()
    time, command, response = time[good], command[good], response[good]
    found: list[Seen] = []
    for end in _ends(response):
        runs = [(first, last) for first, last in stretches(end.at) if last - first >= 3 and first >= 2]
        if runs and _too_flat(command, response, end, runs):
            found.append(_seen(time, runs, f"stand still at the record's {end.name} value {end.value:.6g} {unit}"))
    return tuple(found)


def _ends(response: FloatArray) -> tuple[_End, _End]:
    high, low = float(response.max()), float(response.min())
    return _End(high, "highest", response == high), _End(low, "lowest", response == low)


def _too_flat(command: FloatArray, response: FloatArray, end: _End, runs: list[tuple[int, int]]) -> bool:
    chance = _chance_of_equals(command, response, end, runs)
    if chance is None:
        return False
    equal_pairs = sum(last - first - 1 for first, last in runs)
    return equal_pairs * np.log(1.0 / chance) > np.log(len(response) / CHANCE)


def _chance_of_equals(
    command: FloatArray, response: FloatArray, end: _End, runs: list[tuple[int, int]]
) -> float | None:
    """Chance that neighbours read the same away from this end; None where it can't be judged."""
    inside = ~(end.at[:-2] | end.at[1:-1] | end.at[2:])
    quiet = inside & _standing(command)[2:]
    if np.count_nonzero(quiet) >= FEWEST_TRIPLES:
        return _chance_in_noise(response, quiet)
    return _chance_in_motion(command, response, inside, runs)


def _standing(command: FloatArray) -> BoolArray:
    """(n,) mask: the command is what it was for the last samples."""
    moved = np.concatenate([[False], np.diff(command) != 0.0])
    recent = np.convolve(moved, np.ones(QUIET_SAMPLES), mode="full")[: len(command)]
    return np.asarray(recent == 0)


def _chance_in_noise(response: FloatArray, quiet: BoolArray) -> float | None:
    first = np.diff(response)
    turning = (first[:-1] * first[1:])[quiet] < 0.0
    if np.mean(turning) < TURNING_OF_NOISE:
        return None
    level = float(np.median(np.abs(np.diff(response, 2)[quiet])) / _SECOND_DIFFERENCE)
    step = quantum(response)
    if level < 0.8 * step:
        return None
    equal = (first[1:] == 0.0)[quiet]
    return float(np.clip(max(1.5 * step / (2.0 * np.sqrt(np.pi) * level), _densest(equal)), 0.01, 0.9))


def _densest(equal: BoolArray, width: int = 40) -> float:
    """Largest share of equal neighbours in any stretch of `width`."""
    if len(equal) < width:
        return float(np.mean(equal))
    return float(np.convolve(equal, np.ones(width) / width, mode="valid").max())


def _chance_in_motion(
    command: FloatArray, response: FloatArray, inside: BoolArray, runs: list[tuple[int, int]]
) -> float | None:
    """The same for a command that never stands still: the share of equal neighbours elsewhere.

    A smooth peak of a coarse signal is flat too, but is not reached steeply.
    """
    steep = all(abs(response[first - 1] - response[first - 2]) > STEEP * quantum(response) for first, _ in runs)
    if np.count_nonzero(inside) < 3 * FEWEST_TRIPLES or not steep:
        return None
    moving = sum(len(np.unique(command[first:last])) > 1 for first, last in runs)
    equal = (np.diff(response)[1:] == 0.0)[inside]
    if 2 * moving < len(runs) or _densest(equal) > 0.3:
        return None
    return float(np.clip(_densest(equal), 0.02, 0.9))
