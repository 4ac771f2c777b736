"""The branches of the locus over a list of gains, followed so that none is swapped for another.

A branch is followed in ln K by ds/dlnK = -G_L/G_L' and Newton's method; a step is halved until the branches stay
apart by more than they were corrected. Across a breakaway point, where no step is small enough, all roots are found
anew and matched. With dead time branches enter the picture over its left edge: where and at which gain comes from the
crossings of that line.
"""

import math
from dataclasses import dataclass, field

import numpy as np
from scipy.optimize import linear_sum_assignment

from .condition import LocusError, LocusPoint
from .crossings import line_crossings
from .enclosure import unpaired
from .loop import ComplexArray, FloatArray, OpenLoop, hold_factor, hold_log_derivative
from .roots import closed_loop_roots, default_left, farthest_root

_HALVINGS = 6
_NEWTON_STEPS = 3


class _Factors:
    """G_L by its factors, quicker than by its polynomials for a handful of points."""

    def __init__(self, loop: OpenLoop) -> None:
        zeros, poles, _ = unpaired(loop.zeros, loop.poles)
        self.roots = np.concatenate([zeros, poles])
        self.sign = np.concatenate([np.ones(zeros.size), -np.ones(poles.size)])
        self.lead = np.log(-complex(loop.leading))
        self.dead_time, self.hold = loop.dead_time, loop.hold

    def slope(self, s: ComplexArray) -> ComplexArray:
        """G_L'/G_L, s."""
        value = (1.0 / (s[:, None] - self.roots)) @ self.sign - self.dead_time
        if self.hold is not None:
            value = value + self.hold * hold_log_derivative(s * self.hold)
        return np.asarray(value, dtype=np.complex128)

    def misfit(self, s: ComplexArray, gain: float) -> ComplexArray:
        """ln(-K G_L), its angle in [-pi, pi]."""
        value = np.log(s[:, None] - self.roots) @ self.sign + (self.lead + math.log(gain)) - s * self.dead_time
        value = value if self.hold is None else value + np.log(hold_factor(s * self.hold))
        return np.asarray(value - 2j * np.pi * np.rint(value.imag / (2.0 * np.pi)))


@dataclass
class _Picture:
    """Branches while they are followed: one row of `rows` a branch, NaN where it is not right of `left`."""

    loop: OpenLoop
    gains: FloatArray
    left: float
    rows: list[ComplexArray] = field(default_factory=list)
    active: list[int] = field(default_factory=list)

    def __post_init__(self) -> None:
        self.factors = _Factors(self.loop)

    def add(self) -> int:
        self.rows.append(np.full(self.gains.size, complex(np.nan, np.nan)))
        return len(self.rows) - 1


def locus_branches(loop: OpenLoop, gains: FloatArray, left: float | None = None) -> tuple[ComplexArray, ...]:
    """Branches of the locus over rising gains.

    Parameters
    ----------
    loop : OpenLoop
    gains : (m,) array
        Positive and rising.
    left : float or None, 1/s
        Left edge of the picture; None: no edge without delay, `default_left` with it.

    Returns
    -------
    tuple of (m,) complex arrays, 1/s
        One a branch, NaN where it lies left of the edge.

    Raises
    ------
    LocusError
        The gains are not positive and rising.

    Examples
    --------
    >>> len(locus_branches(OpenLoop((1.0,), (1.0, 3.0, 2.0, 0.0)), np.geomspace(0.01, 10.0, 50)))
    3
    """
    gains = np.asarray(gains, dtype=np.float64)
    if gains.size == 0 or not (np.all(gains > 0.0) and np.all(np.diff(gains) > 0.0)):
        raise LocusError("the gains must be positive and rising", where="branches", found=f"{gains.size} gains")
    edge = -math.inf if loop.rational else default_left(loop)
    picture = _Picture(loop, gains, edge if left is None else left)
    arriving = _arrivals(picture)
    roots = _roots(picture, gains[0])
    picture.active = [picture.add() for _ in roots]
    _record(picture, 0, roots)
    for column in range(1, gains.size):
        roots = _advance(picture, column, roots, arriving)
        roots = _record(picture, column, roots)
    return _polished(picture)


def _roots(picture: _Picture, gain: float) -> ComplexArray:
    right_of = None if picture.left == -math.inf else picture.left
    return closed_loop_roots(picture.loop, float(gain), right_of)


def _record(picture: _Picture, column: int, roots: ComplexArray) -> ComplexArray:
    """Write a column; branches that have left the picture end."""
    inside = roots.real > picture.left
    for branch, root in zip(picture.active, roots, strict=True):
        if root.real > picture.left:
            picture.rows[branch][column] = root
    picture.active = [branch for branch, stays in zip(picture.active, inside, strict=True) if stays]
    return roots[inside]


def _arrivals(picture: _Picture) -> list[LocusPoint]:
    """Points where branches enter over the left edge between the first and the last gain, by rising gain."""
    if picture.left == -math.inf:
        return []
    loop, last = picture.loop, float(picture.gains[-1])
    reach = farthest_root(loop, last, picture.left)
    found = [
        point
        for point in line_crossings(loop, picture.left, reach)
        if picture.gains[0] < point.loop_gain < last and complex(loop.log_derivative(point.point)).real < 0.0
    ]
    return sorted(found, key=lambda point: point.loop_gain)


def _advance(picture: _Picture, column: int, roots: ComplexArray, arriving: list[LocusPoint]) -> ComplexArray:
    """The roots at the next gain in the order of the active branches, newly arrived ones last."""
    low, high = float(picture.gains[column - 1]), float(picture.gains[column])
    while arriving and arriving[0].loop_gain <= high:
        point = arriving.pop(0)
        roots = _followed(picture, low, point.loop_gain, roots)
        low = point.loop_gain
        new = [point.point] if point.point.imag == 0.0 else [point.point, point.point.conjugate()]
        picture.active += [picture.add() for _ in new]
        roots = np.concatenate([roots, new])
    return _followed(picture, low, high, roots)


def _followed(picture: _Picture, low: float, high: float, roots: ComplexArray, depth: int = 0) -> ComplexArray:
    """The same branches at a higher gain."""
    if high <= low or roots.size == 0:
        return roots
    landed = _step(picture.factors, low, high, roots)
    if landed is not None:
        return landed
    if depth >= _HALVINGS:
        return _rematched(picture, high, roots)
    middle = math.sqrt(low * high)
    return _followed(picture, middle, high, _followed(picture, low, middle, roots, depth + 1), depth + 1)


def _step(factors: _Factors, low: float, high: float, roots: ComplexArray) -> ComplexArray | None:
    """One predicted and corrected step; None when it was too long to be sure."""
    span = math.log(high / low)
    with np.errstate(all="ignore"):
        halfway = roots - 0.5 * span / factors.slope(roots)
        predicted = roots - span / factors.slope(halfway)
        s = predicted
        for _ in range(_NEWTON_STEPS):
            step = factors.misfit(s, high) / factors.slope(s)
            s = s - step
            size = np.abs(s)
            if (np.abs(step) <= 1e-6 * size).all():
                break
        else:
            return None
    corrected = np.abs(s - predicted)
    if not (corrected <= 0.2 * np.abs(predicted - roots) + 1e-9 * size).all():
        return None
    apart = np.abs(s[:, None] - s)
    apart.flat[:: s.size + 1] = np.inf
    return s if (apart.min(axis=1) > 4.0 * corrected + 1e-7 * size).all() else None


def _rematched(picture: _Picture, gain: float, roots: ComplexArray) -> ComplexArray:
    """All roots found anew and given to the nearest branches; those that fit no branch start new ones."""
    fresh = _roots(picture, gain)
    if fresh.size < roots.size:  # a branch left the picture on the way: let it step out
        fresh = np.concatenate([fresh, np.full(roots.size - fresh.size, complex(picture.left, 0.0))])
    distance = np.abs(roots[:, None] - fresh[None, :])
    rows, columns = linear_sum_assignment(distance)
    matched = fresh[columns[np.argsort(rows)]]
    rest = np.delete(fresh, columns)
    picture.active += [picture.add() for _ in rest]
    return np.concatenate([matched, rest])


def _polished(picture: _Picture) -> tuple[ComplexArray, ...]:
    """Every point once more by Newton's method, all at once."""
    table = np.array(picture.rows)
    if table.size == 0:
        return ()
    with np.errstate(all="ignore"):
        step = np.log(-picture.gains * picture.loop.at(table)) / picture.loop.log_derivative(table)
        after = np.log(-picture.gains * picture.loop.at(table - step))
        before = np.log(-picture.gains * picture.loop.at(table))
    table = np.where(np.abs(after) < np.abs(before), table - step, table)
    return tuple(table)
