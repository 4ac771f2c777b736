"""A resonance with a zero: K wn^2 (Tz s + 1) exp(-s L) / (s^2 + 2 z wn s + wn^2), damping ratio z below one."""

from .second_order import frequency_shape, polynomials
from .structure import Named, Shape, Structure

RESONANCE_WITH_ZERO = Structure(
    name="resonance with zero",
    formula="K wn^2 (Tz s + 1) / (s^2 + 2 z wn s + wn^2)",
    shapes=(frequency_shape(steps=8), Shape("damping ratio", "ratio", 0.02, 1.0, steps=4)),
    polynomials=polynomials,
    named=(Named("natural frequency", "rad/s"), Named("damping ratio", "1")),
    values=lambda shape: shape,
    zero=True,
    further=True,
)
