"""The command that a known law sent, worked out from the setpoint and the response that it saw."""

import numpy as np
from scipy.signal import lfilter

from .law import Law
from .run import FloatArray


def replay(law: Law, setpoint: FloatArray, response: FloatArray) -> FloatArray:
    """Command of an unclamped law at its own samples, in deviations from the command of the rest before them.

    What the controller saw holds the measurement noise, and so does the command that it made of it: worked out from the
    logged response it is the very command that was sent, noise and all, where both are of the same samples.

    Parameters
    ----------
    law : Law
        Its clamp is not used.
    setpoint : (n,) array, response unit
        From the setpoint before the record.
    response : (n,) array, response unit
        As the controller saw it; from the setpoint before the record where the law integrates, else from its own rest.

    Returns
    -------
    (n,) array, command unit

    Notes
    -----
    u[k] = sum_i setpoint[i] r[k-i] - sum_i response[i] y[k-i] - sum_{i>=1} command[i] u[k-i]: the memory drops out of
    `Law` where u = v.

    Examples
    --------
    >>> law = Law(0.1, (1.0, -1.0), (0.5, 0.0), (0.5, 0.0), (1.0, 0.0))
    >>> replay(law, np.ones(3), np.zeros(3)).tolist()
    [0.5, 1.0, 1.5]
    """
    forward = lfilter(law.setpoint, law.command, setpoint)
    return np.asarray(forward - lfilter(law.response, law.command, response))


def integrates(law: Law) -> bool:
    """Whether the law has a pole at z = 1, so that at rest the response is the setpoint."""
    return abs(sum(law.command)) < 1e-12


def filtered(values: FloatArray, filter_time: float, interval: float) -> FloatArray:
    """Behind a first-order filter, (n,): exact where the values run straight between samples, at rest before them.

    Parameters
    ----------
    filter_time, interval : float, s

    Notes
    -----
    With a = exp(-T/Tf) and s = (1 - a) Tf/T: y[k+1] = a y[k] + (s - a) x[k] + (1 - s) x[k+1] (ramp invariance).

    Examples
    --------
    >>> bool(abs(filtered(np.array([0.0] + [1.0] * 99), 1.0, 0.1)[-1] - 1.0) < 1e-4)
    True
    """
    if filter_time <= 0.0:
        return values
    pole = float(np.exp(-interval / filter_time))
    share = (1.0 - pole) * filter_time / interval
    start = values[0]
    return np.asarray(start + lfilter([1.0 - share, share - pole], [1.0, -pole], values - start))
