"""Gains that keep a margin, exactly: at each frequency the gains that break it are known, and the edges are extrema."""

from collections.abc import Callable

import numpy as np
from scipy.optimize import minimize_scalar

from ...ident.run import FloatArray
from .curve import Curve, roots_between
from .spans import Span, both, without

_REST = 1e-7  # of the lowest frequency of the mesh: as good as rest
_NEAR = 0.06  # rad; a turning point of the angle this close to the bound is looked at closely
Bad = Callable[[FloatArray], tuple[FloatArray, FloatArray]]  # frequencies to ends of the factors that break the bound


def gain_margin_set(curve: Curve, decibels: float) -> tuple[Span, ...]:
    """The stable spans, each shortened by the margin at both ends.

    A span that reaches down to nothing, or up without end, keeps that end.
    """
    share = 10.0 ** (decibels / 20.0)
    return tuple((low * share, high / share) for low, high in curve.stable if low * share < high / share)


def phase_margin_set(curve: Curve, degrees: float) -> tuple[Span, ...]:
    """Stable factors, less those whose gain crossing lies nearer to -180 deg: 1/|F| wherever |angle(-F)| is less."""

    def bad(w: FloatArray) -> tuple[FloatArray, FloatArray]:
        factor = 1.0 / np.abs(curve.at(w))
        return factor, factor

    return without(curve.stable, _broken(curve, np.radians(degrees), bad))


def sensitivity_set(curve: Curve, peak: float) -> tuple[Span, ...]:
    """Stable factors, less those with |1 + x F| < 1/M somewhere.

    x^2 |F|^2 + 2 x Re F + 1 - 1/M^2 < 0 between two roots, which are real where |angle(-F)| < asin(1/M).
    """
    rest = 1.0 - 1.0 / peak**2

    def bad(w: FloatArray) -> tuple[FloatArray, FloatArray]:
        value = curve.at(w)
        square, middle = np.abs(value) ** 2, -value.real
        high = (middle + np.sqrt(np.maximum(middle**2 - square * rest, 0.0))) / square
        return rest / (square * high), high

    return without(curve.stable, _broken(curve, float(np.arcsin(1.0 / peak)), bad))


def _broken(curve: Curve, width: float, bad: Bad) -> list[Span]:
    """Spans of factors that are bad on one arc each: the stretches of frequency with |angle(-F)| < width."""

    def measure(w: FloatArray) -> FloatArray:
        return np.asarray(np.abs(np.angle(-curve.at(w))) - width)

    mesh = _sharpened(measure, curve.mesh)
    inside = measure(mesh) < 0.0
    edges = np.flatnonzero(inside[1:] != inside[:-1])
    roots = roots_between(measure, mesh[edges], mesh[edges + 1])
    starts, ends = roots[~inside[edges]], roots[inside[edges]]
    first, last = bool(inside[0]), bool(inside[-1])
    starts = np.append(_REST * mesh[:1], starts) if first else starts
    ends = np.append(ends, mesh[-1]) if last else ends
    spans = []
    for i, (left, right) in enumerate(zip(starts, ends, strict=True)):
        low, high = _extent(mesh, left, right, bad)
        low = 0.0 if first and i == 0 and curve.falls_from_infinity else low
        high = np.inf if last and i == starts.size - 1 and curve.falls_to_nothing else high
        spans.append((low, high))
    return spans


def _extent(mesh: FloatArray, left: float, right: float, bad: Bad) -> tuple[float, float]:
    """Least and greatest bad factor over one arc: at its ends, on the mesh, or at a turning point between."""
    w = np.unique(np.concatenate([[left], mesh[(mesh > left) & (mesh < right)], [right]]))
    low, high = bad(w)
    return -_most(w, -low, lambda x: -bad(x)[0]), _most(w, high, lambda x: bad(x)[1])


def _most(w: FloatArray, value: FloatArray, function: Callable[[FloatArray], FloatArray]) -> float:
    best, top = float(value.max()), int(value.argmax())
    if 0 < top < w.size - 1:
        best = max(best, -_least_between(lambda x: -function(x), w[top - 1], w[top + 1])[1])
    return best


def _sharpened(measure: Callable[[FloatArray], FloatArray], mesh: FloatArray) -> FloatArray:
    """The mesh with the turning points of the measure that come near to nothing, so that no narrow arc is missed."""
    value = measure(mesh)
    inner, before, after = value[1:-1], value[:-2], value[2:]
    dips = (inner <= before) & (inner <= after) & (inner > 0.0) & (inner < _NEAR)
    tops = (inner >= before) & (inner >= after) & (inner < 0.0) & (inner > -_NEAR)
    added = [_least_between(measure, mesh[i], mesh[i + 2])[0] for i in np.flatnonzero(dips)]
    added += [_least_between(lambda x: -measure(x), mesh[i], mesh[i + 2])[0] for i in np.flatnonzero(tops)]
    return np.unique(np.append(mesh, added))


def _least_between(measure: Callable[[FloatArray], FloatArray], low: float, high: float) -> tuple[float, float]:
    """Where a measure is least between two frequencies, and how much."""
    found = minimize_scalar(
        lambda x: float(measure(np.array([x]))[0]), bounds=(low, high), method="bounded", options={"xatol": 1e-9 * high}
    )
    return float(found.x), float(found.fun)


def within(curve: Curve, spans: tuple[Span, ...]) -> tuple[Span, ...]:
    """Of some spans what is stable."""
    return both(curve.stable, spans)
