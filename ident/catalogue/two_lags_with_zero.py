"""Two lags with a zero: K (Tz s + 1) exp(-s L) / ((T1 s + 1)(T2 s + 1)), T1 >= T2.

A body with a slow wall (Tz between the lags), one that overshoots (Tz above both), or one that first turns the wrong
way (Tz negative).
"""

from .second_order import frequency_shape, polynomials
from .structure import Named, Shape, Structure
from .two_lags import time_constants

TWO_LAGS_WITH_ZERO = Structure(
    name="two lags with zero",
    formula="K (Tz s + 1) / ((T1 s + 1)(T2 s + 1))",
    shapes=(frequency_shape(steps=10), Shape("damping ratio", "ratio", 1.0, 6.0, steps=4)),
    polynomials=polynomials,
    named=(Named("time constant 1", "s"), Named("time constant 2", "s")),
    values=time_constants,
    zero=True,
    further=True,
)
