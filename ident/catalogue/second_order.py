"""The formula that a resonance and two lags share: K wn^2 / (s^2 + 2 z wn s + wn^2).

In natural frequency and damping ratio it stays regular where two lags are equal, so both structures are fitted by it.
"""

from .structure import Polynomials, Shape


def polynomials(shape: tuple[float, ...]) -> Polynomials:
    """Unit-gain second order of natural frequency shape[0], rad/s, and damping ratio shape[1]."""
    frequency, damping = shape
    return (1.0,), (1.0 / (frequency * frequency), 2.0 * damping / frequency, 1.0)


def frequency_shape(steps: int = 18) -> Shape:
    """The natural frequency as an internal parameter."""
    return Shape("natural frequency", "frequency", steps=steps)
