"""Paths through the s plane along which a locus is crossed: straight lines and natural-frequency circles.

On each of them a factor (s - root) turns monotonically: on a line it is direction (t - t_root), and on the circle
s = radius (1 - 2/(1 + j v)) it is a constant times (v - v_root)/(v - j).
"""

from dataclasses import dataclass
from typing import Protocol

import numpy as np

from .loop import ComplexArray, FloatArray


class Path(Protocol):
    """A path s(t) whose imaginary part rises or falls monotonically."""

    @property
    def on_axis(self) -> bool:
        """Whether it is the imaginary axis itself."""
        ...

    @property
    def rate_bound(self) -> float:
        """Largest |ds/dt|."""
        ...

    @property
    def bend(self) -> float:
        """Largest |d2s/dt2|."""
        ...

    def at(self, t: FloatArray) -> ComplexArray:
        """Points, 1/s."""
        ...

    def rate(self, t: FloatArray) -> ComplexArray:
        """ds/dt."""
        ...

    def height_rate(self, lowest: FloatArray, highest: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Least and largest d Im s/dt on intervals of t."""
        ...

    def place(self, roots: ComplexArray) -> ComplexArray:
        """Complex t of the factors (s - root); infinite where a factor is constant."""
        ...

    def common(self, relative_degree: int) -> ComplexArray:
        """Complex t of the factors that a surplus of poles brings with it, taken as zeros."""
        ...


@dataclass(frozen=True)
class Line:
    """s(t) = origin + t direction.

    Attributes
    ----------
    origin : complex, 1/s
    direction : complex
        Of length one.
    """

    origin: complex
    direction: complex

    @property
    def on_axis(self) -> bool:
        return self.origin == 0.0 and self.direction == 1j

    @property
    def rate_bound(self) -> float:
        return 1.0

    @property
    def bend(self) -> float:
        return 0.0

    def at(self, t: FloatArray) -> ComplexArray:
        if self.on_axis:
            return np.asarray(1j * t, dtype=np.complex128)
        return np.asarray(self.origin + t * self.direction, dtype=np.complex128)

    def rate(self, t: FloatArray) -> ComplexArray:
        return np.full(np.shape(t), self.direction, dtype=np.complex128)

    def height_rate(self, lowest: FloatArray, highest: FloatArray) -> tuple[FloatArray, FloatArray]:
        constant = np.full(np.shape(lowest), self.direction.imag)
        return constant, constant

    def place(self, roots: ComplexArray) -> ComplexArray:
        if self.on_axis:
            return roots.imag - 1j * roots.real
        return np.asarray((roots - self.origin) / self.direction, dtype=np.complex128)

    def common(self, relative_degree: int) -> ComplexArray:
        return np.empty(0, dtype=np.complex128)


@dataclass(frozen=True)
class LeftArc:
    """s(v) = radius (1 - 2/(1 + j v)), 0 <= v <= 1: from -radius on the real axis up to j radius.

    Attributes
    ----------
    radius : float, rad/s
        The natural frequency.
    """

    radius: float

    @property
    def on_axis(self) -> bool:
        return False

    @property
    def rate_bound(self) -> float:
        return 2.0 * self.radius

    @property
    def bend(self) -> float:
        return 4.0 * self.radius

    def at(self, t: FloatArray) -> ComplexArray:
        return np.asarray(self.radius * (1.0 - 2.0 / (1.0 + 1j * t)), dtype=np.complex128)

    def rate(self, t: FloatArray) -> ComplexArray:
        return np.asarray(2j * self.radius / (1.0 + 1j * t) ** 2, dtype=np.complex128)

    def height_rate(self, lowest: FloatArray, highest: FloatArray) -> tuple[FloatArray, FloatArray]:
        return self._rise(highest), self._rise(lowest)

    def _rise(self, t: FloatArray) -> FloatArray:
        return np.asarray(2.0 * self.radius * (1.0 - t * t) / (1.0 + t * t) ** 2, dtype=np.float64)

    def place(self, roots: ComplexArray) -> ComplexArray:
        with np.errstate(divide="ignore", invalid="ignore"):
            placed = (self.radius + roots) / (1j * (self.radius - roots))
        return np.where(roots == self.radius, complex(np.inf), placed)

    def common(self, relative_degree: int) -> ComplexArray:
        return np.full(relative_degree, 1j)
