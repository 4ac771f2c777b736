"""A plant: a transfer function with its exact dead time."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

ComplexArray = NDArray[np.complex128]


@dataclass(frozen=True)
class Plant:
    """numerator(s)/denominator(s) exp(-s dead_time), from command to response.

    Attributes
    ----------
    numerator, denominator : tuple of float
        Coefficients in s, highest power first, in seconds; their ratio is in response unit per command unit.
    dead_time : float, s
        Of the rig alone: no hold, no computation delay.

    Examples
    --------
    >>> lag = Plant((2.0,), (0.5, 1.0), 0.1)
    >>> lag.static_gain
    2.0
    >>> abs(lag.at(2j)) * abs(1 + 1j)
    2.0
    """

    numerator: tuple[float, ...]
    denominator: tuple[float, ...]
    dead_time: float = 0.0

    def at(self, s: complex) -> complex:
        """Value at one point of the s plane, dead time included."""
        ratio = np.polyval(self.numerator, s) / np.polyval(self.denominator, s)
        return complex(ratio * np.exp(-s * self.dead_time))

    def response_at(self, frequency: NDArray[np.float64]) -> ComplexArray:
        """Frequency response, (m,) complex, at (m,) angular frequencies in rad/s."""
        s = 1j * frequency
        ratio = np.polyval(self.numerator, s) / np.polyval(self.denominator, s)
        return np.asarray(ratio * np.exp(-s * self.dead_time), dtype=np.complex128)

    @property
    def poles(self) -> ComplexArray:
        """(n,) poles of the rational part, 1/s."""
        return np.asarray(np.roots(self.denominator), dtype=np.complex128)

    @property
    def zeros(self) -> ComplexArray:
        """(m,) zeros of the rational part, 1/s."""
        return np.asarray(np.roots(self.numerator), dtype=np.complex128)

    @property
    def integrators(self) -> int:
        """How many poles stand at the origin exactly."""
        trailing = 0
        for coefficient in reversed(self.denominator):
            if coefficient != 0.0:
                break
            trailing += 1
        return trailing

    @property
    def static_gain(self) -> float:
        """Gain at rest, response unit per command unit; for an integrating plant of s^k times the plant at s = 0."""
        return float(self.numerator[-1] / self.denominator[len(self.denominator) - 1 - self.integrators])
