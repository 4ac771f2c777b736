"""How noisy and how coarse a signal is, sample by sample."""

import numpy as np

from ..run import FloatArray

_MAD = 0.6744897501960817  # 75 % point of the normal distribution


def noise_level(values: FloatArray) -> float:
    """Standard deviation of the sample-to-sample noise, from the median of the second differences.

    A smooth signal leaves little in its second differences, and the median leaves jumps out. White noise of standard
    deviation sigma gives second differences of sqrt(6) sigma.

    Parameters
    ----------
    values : (n,) array
        NaN is left out.

    Returns
    -------
    float, in the unit of the values; 0 for fewer than five samples.
    """
    good = values[np.isfinite(values)]
    if len(good) < 5:
        return 0.0
    second = np.abs(np.diff(good, 2))
    return float(np.median(second) / (_MAD * np.sqrt(6.0)))


def quantum(values: FloatArray) -> float:
    """Smallest step between two different values, the resolution of the record; 0 for a constant.

    Steps below 1e-9 of the span are rounding of the arithmetic, not of the instrument.
    """
    good = values[np.isfinite(values)]
    levels = np.unique(good)
    if len(levels) < 2:
        return 0.0
    steps = np.diff(levels)
    real = steps[steps > 1e-9 * (levels[-1] - levels[0])]
    return float(real.min()) if len(real) else 0.0
