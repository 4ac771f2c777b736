"""A sensor at the end of its range: readings that stand still at the record's highest or lowest value."""

import numpy as np

from ..run import FloatArray
from .noise_at_rest import FEWEST, no_chance, noisy_at_rest, surely_noisy
from .noise_level import quantum
from .seen import BoolArray, Seen, stretches

STEEP = 4.0  # quanta from sample to sample


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
    """Flat stretches at an extreme of a signal that is flat nowhere else.

    The equal neighbours at the extreme are counted against the chance of equal neighbours elsewhere, taken where they
    are densest: a signal whose noise is below its resolution is flat at every rest, and nothing is said about it. Only
    stretches that are entered by more than a few quanta count: a smooth signal settles and turns slowly. A flat start
    or end may be a rig at rest, and tells only where there is noise.

    Parameters
    ----------
    time : (n,) array, s
    command : (n,) array
    response : (n,) array, in `unit`; NaN is left out
    """
    good = np.isfinite(response)
    if np.count_nonzero(good) < FEWEST or np.ptp(response[good]) == 0.0:
        return ()
    time, command, response = time[good], command[good], response[good]
    high, low = response == response.max(), response == response.min()
    if not any(np.any(at[2:] & at[1:-1] & at[:-2]) for at in (high, low)):
        return ()  # no stretch that could tell: spares the rest on a long record
    noisy = noisy_at_rest(command, response, high | low)
    surely = noisy and surely_noisy(command, response, high | low)
    found: list[Seen] = []
    for at, name in ((high, "highest"), (low, "lowest")):
        runs = [run for run in stretches(at) if _tells(run, response, noisy, surely)]
        if runs and _too_flat(response, (high | low) if surely else at, runs):
            value = f"{response[at][0]:.6g} {unit}"
            found.append(_seen(time, runs, f"stand still at the record's {name} value {value}"))
    return tuple(found)


def _tells(run: tuple[int, int], response: FloatArray, noisy: bool, surely: bool) -> bool:
    """Whether a flat stretch can't be rest: three samples at least, entered steeply, not a quiet start or end."""
    first, last = run
    if last - first < 3:
        return False
    if first < 2:
        return surely
    entered = np.max(np.abs(np.diff(response[max(0, first - 3) : first + 1]))) > STEEP * quantum(response)
    return bool(entered and (noisy or last < len(response)))


def _too_flat(response: FloatArray, left_out: BoolArray, runs: list[tuple[int, int]]) -> bool:
    """Whether so many equal neighbours can't be chance, by their share elsewhere (noisy signal: at neither end)."""
    return no_chance(response, left_out, sum(last - first - 1 for first, last in runs))
