"""Frequency response without a model: H1, coherence and their random errors, for pictures and first guesses.

Parameters are never fitted to these: segments leak and bias what a fit in the time domain gets exactly.
"""

from dataclasses import dataclass

import numpy as np
from numpy.lib.stride_tricks import sliding_window_view
from scipy.signal import get_window

from .plant import ComplexArray
from .run import FloatArray

# Samples of one signal that are transformed at once.
_AT_ONCE = 65_536


@dataclass(frozen=True, eq=False)
class Spectra:
    """Averages over Hann segments that overlap by half.

    Attributes
    ----------
    frequency : (m,) array, rad/s
    response : (m,) complex array, response unit per command unit
        H1, the cross spectrum over the command's: unbiased by noise of the response, low where the command is noisy.
    coherence : (m,) array
    averages : float
        Independent segments that would tell as much.
    """

    frequency: FloatArray
    response: ComplexArray
    coherence: FloatArray
    averages: float


def spectra(command: FloatArray, response: FloatArray, interval: float, segment: int) -> Spectra:
    """Spectra of one evenly sampled record.

    Parameters
    ----------
    command, response : (n,) arrays
        Finite.
    interval : float, s
    segment : int
        Samples a segment, at most n.

    References
    ----------
    Bendat and Piersol, Random Data, chapter on single-input/output relationships (from memory). Welch, P. D., IEEE
    Trans. Audio Electroacoustics 15 (1967) 70-73: overlapped segments.
    """
    step = segment - segment // 2
    window = get_window("hann", segment)
    pair = [sliding_window_view(np.asarray(x, dtype=float), segment)[::step] for x in (command, response)]
    of_command, of_response = np.zeros(segment // 2 + 1), np.zeros(segment // 2 + 1)
    across = np.zeros(segment // 2 + 1, dtype=np.complex128)
    together = max(_AT_ONCE // segment, 1)
    for first in range(0, len(pair[0]), together):
        parts = [x[first : first + together] for x in pair]
        u, y = (np.fft.rfft((part - part.mean(axis=1, keepdims=True)) * window) for part in parts)
        of_command += np.sum(u.real**2 + u.imag**2, axis=0)
        of_response += np.sum(y.real**2 + y.imag**2, axis=0)
        across += np.sum(np.conj(u) * y, axis=0)
    power = of_command * of_response
    seen = np.where(power > 0, np.abs(across) ** 2 / np.where(power > 0, power, 1.0), 0.0)
    quiet = of_command <= 0
    ratio = np.where(quiet, 0.0, across / np.where(quiet, 1.0, of_command))
    count = len(pair[0])
    averages = count / variance_ratio("hann", count)
    frequency = np.asarray(2 * np.pi * np.fft.rfftfreq(segment, interval), dtype=float)
    return Spectra(frequency, ratio, np.minimum(seen, 1.0), averages)


def variance_ratio(window: str, segments: int, overlap: float = 0.5) -> float:
    """Variance of an average over overlapping segments, over that of as many independent ones."""
    ratio = 1.0
    for lag in range(1, segments):
        shared = overlap_correlation(window, 1.0 - lag * (1.0 - overlap))
        if shared == 0.0:
            break
        ratio += 2 * (1 - lag / segments) * shared**2
    return ratio


def overlap_correlation(window: str, overlap: float, points: int = 4096) -> float:
    """Correlation of two segments' spectra of white noise that overlap by this share."""
    if overlap <= 0:
        return 0.0
    shape = get_window(window, points)
    shift = round((1.0 - overlap) * points)
    return float(shape[: points - shift] @ shape[shift:] / (shape @ shape))


def noise_bandwidth(window: str, points: int = 4096) -> float:
    """Equivalent noise bandwidth of a window, in bins."""
    shape = get_window(window, points)
    return float(points * (shape @ shape) / np.sum(shape) ** 2)


def response_error(coherence: FloatArray, averages: float) -> FloatArray:
    """Standard error of |H1| over |H1|, and of its phase in rad: sqrt((1 - g2)/(2 g2 nd))."""
    safe = np.maximum(coherence, 1e-300)
    return np.asarray(np.sqrt((1.0 - coherence) / (2.0 * safe * averages)))


def coherence_error(coherence: FloatArray, averages: float) -> FloatArray:
    """Standard error of the coherence over itself: sqrt(2)(1 - g2)/sqrt(g2 nd)."""
    return np.asarray(np.sqrt(2.0) * (1.0 - coherence) / np.sqrt(np.maximum(coherence, 1e-300) * averages))


def coherence_of_chance(averages: float, level: float = 0.95) -> float:
    """Coherence that unrelated signals stay below with this probability: 1 - (1 - level)^(1/(nd - 1))."""
    return float(1.0 - (1.0 - level) ** (1.0 / (averages - 1.0)))


def spectrum_error(averages: float) -> float:
    """Standard error of an auto-spectrum over itself: 1/sqrt(nd)."""
    return float(1.0 / np.sqrt(averages))
