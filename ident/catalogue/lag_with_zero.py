"""One lag with a zero: K (Tz s + 1) exp(-s L) / (T s + 1); part of the response comes at once."""

from .lag import polynomials
from .structure import Named, Shape, Structure

LAG_WITH_ZERO = Structure(
    name="lag with zero",
    formula="K (Tz s + 1) / (T s + 1)",
    shapes=(Shape("time constant", "time", steps=24),),
    polynomials=polynomials,
    named=(Named("time constant", "s"),),
    values=lambda shape: shape,
    zero=True,
    further=True,
)
