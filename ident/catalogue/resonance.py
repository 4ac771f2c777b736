"""A resonance: K wn^2 exp(-s L) / (s^2 + 2 z wn s + wn^2) with damping ratio z below one."""

from .second_order import frequency_shape, polynomials
from .structure import Named, Shape, Structure

RESONANCE = Structure(
    name="resonance",
    formula="K wn^2 / (s^2 + 2 z wn s + wn^2)",
    shapes=(frequency_shape(), Shape("damping ratio", "ratio", 0.01, 1.0, steps=7)),
    polynomials=polynomials,
    named=(Named("natural frequency", "rad/s"), Named("damping ratio", "1")),
    values=lambda shape: shape,
)
