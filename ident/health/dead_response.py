"""A response that does not answer the command: constant, or noise without any relation to it."""

import numpy as np
from scipy.linalg import solve_toeplitz
from scipy.signal import fftconvolve, lfilter

from ..run import FloatArray
from .seen import Seen

ORDER = 8  # of the whitening filter
SIGNIFICANT = 5.0  # deviations of a correlation of unrelated white noise
UNFORETOLD = 0.15  # share of the variance; first-order noise with a correlation of 0.92 from sample to sample
FEWEST = 100
_TIMES = np.array([0.002, 0.01, 0.03, 0.1, 0.3])  # time constants tried, as shares of the record


def see_dead_response(time: FloatArray, command: FloatArray, response: FloatArray, unit: str) -> tuple[Seen, ...]:
    """A response that is constant, or that is noise unrelated to a command that moves.

    Unrelated means all of these: it looks like noise (a sample can hardly be foretold from those before it; a plant's
    response to anything but white noise can), lags, integrals and delays of the command explain hardly any of it, and
    the whitened response is correlated with the equally filtered command at no lag.

    Parameters
    ----------
    time : (n,) array, s
    command : (n,) array
    response : (n,) array, in `unit`
    """
    good = np.isfinite(response)
    advice = "check the sensor, its wiring and the source that the rig file names for the response"
    if not good.any():
        return (Seen("dead response", "whole record", "every sample is lost", advice, "stops"),)
    values = response[good]
    where = f"{time[0]:.6g} s to {time[-1]:.6g} s"
    if np.ptp(values) <= 1e-12 * max(1.0, float(np.abs(values).max())):
        return (Seen("dead response", where, f"stands at {values[0]:.6g} {unit} in every sample", advice, "stops"),)
    moved = command[good]
    if len(values) < FEWEST or np.ptp(moved) == 0.0 or not _noise_like(values):
        return ()
    if _explained(moved, values) or _correlated(moved, values):
        return ()
    size = f"{np.std(values):.3g} {unit} rms, no relation to the command at any lag"
    return (Seen("dead response", where, size, advice, "holds"),)


def _noise_like(response: FloatArray) -> bool:
    """Whether the samples before foretell little of a sample: white noise, or noise with a short memory."""
    centred = response - response.mean()
    rest = lfilter(_whitening(centred), [1.0], centred)[ORDER:]
    return bool(np.var(rest) > UNFORETOLD * np.var(centred))


def _explained(command: FloatArray, response: FloatArray) -> bool:
    """Whether a lag or the integral of the command, delayed, explains a good part of the response."""
    count = len(response)
    target = response - response.mean()
    rho = float(np.clip(target[1:] @ target[:-1] / (target @ target), 0.0, 0.98))
    needed = min(0.3, max(0.1, 12.0 * (1.0 + rho) / (1.0 - rho) / count))
    start = command - command[0]
    shapes = [np.cumsum(start), start]
    for share in _TIMES:
        pole = np.exp(-1.0 / max(share * count, 1e-9))
        shapes.append(lfilter([1.0 - pole], [1.0, -pole], start))
    for delay in (0.0, 0.01, 0.05, 0.1, 0.2):
        shift = int(delay * count)
        for shape in shapes:
            if _share(np.concatenate([np.full(shift, shape[0]), shape[: count - shift]]), target) > needed:
                return True
    return False


def _share(shape: FloatArray, target: FloatArray) -> float:
    """Share of the target's variance along one shape."""
    centred = shape - shape.mean()
    energy = float(centred @ centred)
    return 0.0 if energy == 0.0 else float((centred @ target) ** 2 / (energy * (target @ target)))


def _correlated(command: FloatArray, response: FloatArray) -> bool:
    """Whether the whitened response follows the equally filtered command at any lag, most of a record ahead at most."""
    weights = _whitening(response - response.mean())
    driven = lfilter(weights, [1.0], command - command[0])[ORDER:]
    white = lfilter(weights, [1.0], response - response.mean())[ORDER:]
    driven, white = driven - driven.mean(), white - white.mean()
    energy = float(np.sqrt((driven @ driven) * (white @ white)))
    if energy == 0.0:
        return True
    lags = fftconvolve(white, driven[::-1])[len(driven) - 1 :] / energy
    return bool(np.max(np.abs(lags[: max(1, len(lags) * 3 // 4)])) > SIGNIFICANT / np.sqrt(len(white)))


def _whitening(values: FloatArray) -> FloatArray:
    """Prediction error filter of an autoregression by Yule and Walker."""
    count = len(values)
    moments = np.array([values[: count - lag] @ values[lag:] for lag in range(ORDER + 1)]) / count
    moments[0] *= 1.0 + 1e-9
    return np.concatenate([[1.0], -solve_toeplitz(moments[:-1], moments[1:])])
