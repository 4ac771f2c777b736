"""Fewer points with the same picture: least and greatest of each stretch of a long line."""

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
STRETCHES = 500


def thin_line(time: FloatArray, values: FloatArray, stretches: int = STRETCHES) -> tuple[FloatArray, FloatArray]:
    """Keep the least and the greatest sample of each stretch, in order of time.

    Parameters
    ----------
    time, values : (n,) arrays
        values may hold NaN; a stretch of nothing else stays a gap.
    stretches : int

    Returns
    -------
    time, values : (m,) arrays, m <= 2 stretches, or the input where it is short enough
    """
    if len(time) <= 2 * stretches:
        return time, values
    wide = -(-len(time) // stretches)
    padded = np.full(-(-len(time) // wide) * wide, np.nan)
    padded[: len(time)] = values
    rows = padded.reshape(-1, wide)
    lost = np.isnan(rows)
    first = np.arange(len(rows)) * wide
    least = first + np.where(lost, np.inf, rows).argmin(axis=1)
    greatest = first + np.where(lost, -np.inf, rows).argmax(axis=1)
    index = np.unique(np.concatenate([least, greatest]))
    return time[index], values[index]


def thin_band(
    time: FloatArray, low: FloatArray, high: FloatArray, stretches: int = STRETCHES // 2
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Keep, of each stretch, the least of the lower and the greatest of the upper edge, at the stretch's middle."""
    if len(time) <= stretches:
        return time, low, high
    parts = np.array_split(np.arange(len(time)), stretches)
    middle = np.asarray([time[part].mean() for part in parts])
    middle[0], middle[-1] = time[0], time[-1]
    return middle, np.asarray([low[part].min() for part in parts]), np.asarray([high[part].max() for part in parts])
