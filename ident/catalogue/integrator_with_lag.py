"""An integrator behind a lag: K exp(-s L) / (s (T s + 1))."""

from .structure import Named, Polynomials, Shape, Structure


def polynomials(shape: tuple[float, ...]) -> Polynomials:
    """Unit-gain integrator with a lag of time constant shape[0], s."""
    return (1.0,), (shape[0], 1.0, 0.0)


INTEGRATOR_WITH_LAG = Structure(
    name="integrator with lag",
    formula="K / (s (T s + 1))",
    shapes=(Shape("time constant", "time", steps=24),),
    polynomials=polynomials,
    named=(Named("time constant", "s"),),
    values=lambda shape: shape,
    integrators=1,
)
