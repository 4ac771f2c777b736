"""Two resonances side by side: K (G1 + r G2) / (1 + r), each G wn^2 / (s^2 + 2 z wn s + wn^2), in phase or opposed."""

from collections.abc import Callable

import numpy as np

from .structure import Named, Polynomials, Shape, Structure


def in_phase(shape: tuple[float, ...]) -> Polynomials:
    """Unit gain: natural frequency shape[0], rad/s, damping ratio shape[1]; the second mode's frequency shape[2] times
    as high, its damping ratio shape[3], its share shape[4] of the first one's gain."""
    return _side_by_side(shape, 1.0)


def opposed(shape: tuple[float, ...]) -> Polynomials:
    """The same with the second mode moving against the first."""
    return _side_by_side(shape, -1.0)


def _side_by_side(shape: tuple[float, ...], sign: float) -> Polynomials:
    frequency, damping, ratio, second, share = shape
    first, other = _mode(frequency, damping), _mode(ratio * frequency, second)
    part = sign * share
    whole = 1.0 + part if part != -1.0 else 1e-9
    top = tuple((b + part * a) / whole for a, b in zip(first, other, strict=True))
    return top, tuple(float(c) for c in np.polymul(first, other))


def _mode(frequency: float, damping: float) -> tuple[float, float, float]:
    return 1.0 / (frequency * frequency), 2.0 * damping / frequency, 1.0


_SHAPES = (
    Shape("natural frequency", "frequency", steps=4),
    Shape("damping ratio", "ratio", 0.04, 0.3, steps=2),
    Shape("frequency ratio", "ratio", 1.5, 5.0, steps=3),
    Shape("damping ratio of mode 2", "ratio", 0.03, 0.1, steps=2),
    Shape("share of mode 2", "ratio", 0.03, 0.3, steps=2),
)
_NAMED = (
    Named("natural frequency 1", "rad/s"),
    Named("damping ratio 1", "1"),
    Named("natural frequency 2", "rad/s"),
    Named("damping ratio 2", "1"),
    Named("share of mode 2", "1"),
)


def _values(shape: tuple[float, ...]) -> tuple[float, ...]:
    frequency, damping, ratio, second, share = shape
    return frequency, damping, ratio * frequency, second, share


def _structure(name: str, sign: str, polynomials: Callable[[tuple[float, ...]], Polynomials]) -> Structure:
    return Structure(
        name=name,
        formula=f"K (G1 {sign} r G2) / (1 {sign} r), G = wn^2 / (s^2 + 2 z wn s + wn^2)",
        shapes=_SHAPES,
        polynomials=polynomials,
        named=_NAMED,
        values=_values,
        further=True,
        beside="resonance",
    )


TWO_RESONANCES = _structure("two resonances", "+", in_phase)
TWO_OPPOSED_RESONANCES = _structure("two opposed resonances", "-", opposed)
