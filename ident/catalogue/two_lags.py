"""Two lags in a row: K exp(-s L) / ((T1 s + 1)(T2 s + 1)), T1 >= T2."""

import math

from .second_order import frequency_shape, polynomials
from .structure import Named, Shape, Structure


def time_constants(shape: tuple[float, ...]) -> tuple[float, ...]:
    """Both time constants, s, from natural frequency and damping ratio; equal ones where the ratio is one or less."""
    frequency, damping = shape
    root = math.sqrt(max(damping * damping - 1.0, 0.0))
    slow = (damping + root) / frequency
    return slow, 1.0 / (frequency * frequency * slow)


TWO_LAGS = Structure(
    name="two lags",
    formula="K / ((T1 s + 1)(T2 s + 1))",
    shapes=(frequency_shape(), Shape("damping ratio", "ratio", 1.0, 6.0, steps=5)),
    polynomials=polynomials,
    named=(Named("time constant 1", "s"), Named("time constant 2", "s")),
    values=time_constants,
)
