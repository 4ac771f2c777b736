"""Steady tones in the response that the command does not explain: mains pick-up, also aliased, and vibration."""

from dataclasses import dataclass

import numpy as np

from ..run import FloatArray
from .seen import Seen

MOST_SAMPLES = 2**16
FEWEST = 200
REACH = 24  # bins on either side that a line is held against
LINE = 60.0  # times the median of its neighbours; white noise passes that once in 2^60 bins
BESIDE = 0.1  # of the line's power: more beside it, and it is a resonance
COMMANDED = 0.1  # of LINE: as much of a line in the command explains the one in the response
STEADY = 1.5  # largest over smallest amplitude in the quarters of the record
TURN = 0.6  # rad that a quarter may be off
MAINS = (50.0, 60.0)  # Hz
HARMONICS = (1, 2, 3, 5)


@dataclass(frozen=True)
class Tone:
    """A line: frequency in Hz, amplitude in the unit of the response."""

    frequency: float
    amplitude: float


def see_tones(time: FloatArray, command: FloatArray, response: FloatArray, unit: str) -> tuple[Seen, ...]:
    """The strongest steady tone, named after the mains where it is one or an alias of one.

    Parameters
    ----------
    time : (n,) array, s
        Even enough: of stamps that jitter by more than a fifth nothing is said.
    command : (n,) array
    response : (n,) array, in `unit`
        NaN where lost.
    """
    count = min(len(time), MOST_SAMPLES)
    good = np.isfinite(response[:count])
    if count < FEWEST or np.count_nonzero(good) < 0.9 * count:
        return ()
    steps = np.diff(time[:count])
    interval = float(np.median(steps))
    if np.mean(np.abs(steps - interval) > 0.2 * interval) > 0.01:
        return ()
    filled = np.interp(np.arange(count), np.flatnonzero(good), response[:count][good])
    tone = _strongest(filled, command[:count], interval)
    if tone is None:
        return ()
    kind, action = _named(tone.frequency, 1.0 / interval, 1.0 / (count * interval))
    size = f"{tone.frequency:.4g} Hz, {tone.amplitude:.3g} {unit} amplitude"
    return (Seen(kind, f"{time[0]:.6g} s to {time[count - 1]:.6g} s", size, action),)


def _strongest(response: FloatArray, command: FloatArray, interval: float) -> Tone | None:
    power, ratio = _lines(np.diff(response))
    driven = _lines(np.diff(command))[1]
    far = power.copy()
    order = np.argsort(ratio)[::-1][:5]
    for place in order:
        if ratio[place] < LINE or place < 5 or place > len(power) - 7:
            continue
        near = slice(place - 3, place + 4)
        beside = max(far[place - 5 : place - 3].max(), far[place + 4 : place + 6].max())
        if np.max(driven[near]) > COMMANDED * LINE or beside > BESIDE * power[place]:
            continue
        tone = _steady(response, place, interval)
        if tone is not None:
            return tone
    return None


def _lines(values: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Power by frequency under a Hann window, and how far each stands above the median of its neighbours."""
    centred = (values - values.mean()) * np.hanning(len(values))
    if not centred.any():
        return np.zeros(len(values) // 2 + 1), np.zeros(len(values) // 2 + 1)
    power = np.abs(np.fft.rfft(centred)) ** 2
    padded = np.pad(power, REACH, mode="reflect")
    windows = np.lib.stride_tricks.sliding_window_view(padded, 2 * REACH + 1)
    around = np.delete(windows, range(REACH - 3, REACH + 4), axis=1)
    floor = np.median(around, axis=1) + 1e-24 * float(power.max())
    return power, np.asarray(power / floor)


def _steady(response: FloatArray, place: int, interval: float) -> Tone | None:
    """The tone at this bin when all quarters of the record have it alike, in amplitude and in phase."""
    count = len(response)
    index = np.arange(count)
    rough = place / (count - 1)
    trend = np.polynomial.Polynomial.fit(index, response, 3)(index)
    quarters = np.array_split(index, 4)
    turned = (response - trend) * np.exp(-2j * np.pi * rough * index)
    parts = np.array([2.0 * np.mean(turned[q] * np.hanning(len(q))) / np.mean(np.hanning(len(q))) for q in quarters])
    sizes = np.abs(parts)
    if sizes.min() <= 0.0 or sizes.max() > STEADY * sizes.min():
        return None
    phases = np.unwrap(np.angle(parts))
    slope = (phases[-1] - phases[0]) / 3.0
    if np.max(np.abs(phases - phases[0] - slope * np.arange(4))) > TURN:
        return None
    exact = rough + slope / (2.0 * np.pi * count / 4.0)
    return Tone(float(exact / interval), float(sizes.mean()))


def _named(frequency: float, rate: float, width: float) -> tuple[str, str]:
    """Kind and action of a tone by its frequency; `width` is the resolution of the record, Hz."""
    for mains in MAINS:
        for harmonic in HARMONICS:
            true = mains * harmonic
            alias = abs(true - rate * round(true / rate))
            near = 2.0 * width + 0.004 * true  # mains wander by some 0.2 %
            if abs(frequency - true) < near:
                return (
                    "mains tone",
                    f"{true:g} Hz of the mains: look at shields and earthing; the controller sees it too",
                )
            if true > 0.5 * rate and near < 0.1 * rate and abs(frequency - alias) < near:
                said = f"{true:g} Hz from the mains, folded by sampling at {rate:.4g} Hz: filter before sampling"
                return "aliased mains tone", said
    return "steady tone", "find its source: the command doesn't explain it, and the controller will answer it"
