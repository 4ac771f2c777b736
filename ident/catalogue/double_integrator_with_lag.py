"""A double integrator behind a lag: K exp(-s L) / (s^2 (T s + 1)), such as a free mass behind its drive."""

from .structure import Named, Polynomials, Shape, Structure


def polynomials(shape: tuple[float, ...]) -> Polynomials:
    """Unit-gain double integrator with a lag of time constant shape[0], s."""
    return (1.0,), (shape[0], 1.0, 0.0, 0.0)


DOUBLE_INTEGRATOR_WITH_LAG = Structure(
    name="double integrator with lag",
    formula="K / (s^2 (T s + 1))",
    shapes=(Shape("time constant", "time", steps=24),),
    polynomials=polynomials,
    named=(Named("time constant", "s"),),
    values=lambda shape: shape,
    integrators=2,
)
