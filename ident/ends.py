"""Ends of the 95 % interval that draws leave open, where the quantity can't be less than some value."""

import numpy as np

from .run import FloatArray

SHARE = 0.95


def interval_ends(draws: FloatArray, best: float, least: float = -np.inf) -> tuple[float, float]:
    """Ends of the interval of 95 % of the draws; it holds the best value.

    Parameters
    ----------
    draws : (m,) array
    best : float
        The fitted value.
    least : float
        What the quantity can't fall below: nought for a dead time.

    Returns
    -------
    low, high : float, unit of the draws

    Notes
    -----
    The middle 95 %, as many of the rest below as above, never reach the bound, whatever the record says: a dead time of
    nought would be held outside its own interval every other time. Where the 95 % that begin at the bound are the
    shorter interval, they are taken: the step towards the highest density that matters there.

    References
    ----------
    Box, G. E. P., and Tiao, G. C., Bayesian Inference in Statistical Analysis (1973), Sec. 2.8: intervals of highest
    density (from memory).

    Examples
    --------
    >>> even = (np.arange(1000) + 0.5) / 1000
    >>> [round(end, 2) for end in interval_ends(even, 0.5)]
    [0.03, 0.97]
    >>> [round(end, 2) for end in interval_ends(even**2, 0.1, 0.0)]
    [0.0, 0.9]
    """
    tail = 0.5 * (1.0 - SHARE)
    low, high, from_bound = (float(q) for q in np.quantile(draws, [tail, 1.0 - tail, SHARE]))
    if from_bound - least <= high - low:
        low, high = least, from_bound
    return min(low, best), max(high, best)
