"""Every point of the locus on the lines through a chosen point: its damping ray, its circle, its settling line."""

import math
from dataclasses import dataclass

from .condition import LocusPoint
from .crossings import circle_crossings, line_crossings, ray_crossings
from .loop import OpenLoop

_FAR = 6.0  # times the distance of the chosen point: as far out as is looked
_SAME = 1e-6


@dataclass(frozen=True)
class Offered:
    """The crossings of one line.

    Attributes
    ----------
    kind : {"damping ratio", "natural frequency", "settling line"}
    at : float
        Damping ratio; natural frequency in rad/s; real part in 1/s.
    points : tuple of LocusPoint
        All of them, upper half-plane, by rising K.
    """

    kind: str
    at: float
    points: tuple[LocusPoint, ...]


def offered(loop: OpenLoop, chosen: complex) -> tuple[Offered, ...]:
    """What else lies where the chosen point does: no ray for a real one, no line for one on the axis.

    Examples
    --------
    >>> loop = OpenLoop((1.0, 1.5), (1.0, 11.0, 10.0, 0.0))
    >>> ray = offered(loop, complex(-0.8728, 0.6546))[0]
    >>> ray.kind, [round(point.loop_gain, 1) for point in ray.points]
    ('damping ratio', [7.3, 12.8, 39.6])
    """
    size, found = abs(chosen), []
    damping = -chosen.real / size if size else 0.0
    if 1e-3 < damping < 1.0 - 1e-9:
        found.append(Offered("damping ratio", damping, _sorted(ray_crossings(loop, damping, _FAR * size))))
    if size > 0.0 and chosen.real < 0.0:
        found.append(Offered("natural frequency", size, _sorted(circle_crossings(loop, size))))
        found.append(Offered("settling line", chosen.real, _sorted(line_crossings(loop, chosen.real, _FAR * size))))
    return tuple(found)


def _sorted(points: tuple[LocusPoint, ...]) -> tuple[LocusPoint, ...]:
    return tuple(sorted((p for p in points if 0.0 < p.loop_gain < math.inf), key=lambda p: p.loop_gain))


def is_same(point: LocusPoint, chosen: complex) -> bool:
    """Whether a point is the chosen one."""
    upper = complex(chosen.real, abs(chosen.imag))
    return abs(point.point - upper) <= _SAME * abs(upper)
