"""Sets of positive numbers as sorted, disjoint spans (low, high); an endless one has high = inf."""

import math
from collections.abc import Iterable

Span = tuple[float, float]
EVERYTHING: tuple[Span, ...] = ((0.0, math.inf),)


def joined(spans: Iterable[Span]) -> tuple[Span, ...]:
    """Overlapping and touching spans as one; empty ones dropped.

    Examples
    --------
    >>> joined([(3.0, 4.0), (1.0, 2.0), (2.0, 2.5), (5.0, 5.0)])
    ((1.0, 2.5), (3.0, 4.0))
    """
    merged: list[Span] = []
    for low, high in sorted(span for span in spans if span[1] > span[0]):
        if merged and low <= merged[-1][1]:
            merged[-1] = (merged[-1][0], max(merged[-1][1], high))
        else:
            merged.append((low, high))
    return tuple(merged)


def both(first: Iterable[Span], second: Iterable[Span]) -> tuple[Span, ...]:
    """What lies in both sets.

    Examples
    --------
    >>> both([(0.0, 2.0), (3.0, 9.0)], [(1.0, 4.0)])
    ((1.0, 2.0), (3.0, 4.0))
    """
    second = tuple(second)
    return joined((max(a, c), min(b, d)) for a, b in first for c, d in second)


def without(spans: Iterable[Span], holes: Iterable[Span]) -> tuple[Span, ...]:
    """What is left of a set.

    Examples
    --------
    >>> without([(0.0, 10.0)], [(2.0, 3.0), (9.0, 12.0)])
    ((0.0, 2.0), (3.0, 9.0))
    """
    left: list[Span] = []
    gaps = joined(holes)
    for low, high in joined(spans):
        start = low
        for a, b in gaps:
            if b <= start or a >= high:
                continue
            left.append((start, min(a, high)))
            start = max(start, b)
        left.append((start, high))
    return joined(left)
