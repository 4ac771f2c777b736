"""One lag: K exp(-s L) / (T s + 1)."""

from .structure import Named, Polynomials, Shape, Structure


def polynomials(shape: tuple[float, ...]) -> Polynomials:
    """Unit-gain lag of time constant shape[0], s."""
    return (1.0,), (shape[0], 1.0)


LAG = Structure(
    name="lag",
    formula="K / (T s + 1)",
    shapes=(Shape("time constant", "time", steps=24),),
    polynomials=polynomials,
    named=(Named("time constant", "s"),),
    values=lambda shape: shape,
)
