"""A double integrator: K exp(-s L) / s^2, such as a free mass moved by a force."""

from .structure import Polynomials, Structure


def polynomials(shape: tuple[float, ...]) -> Polynomials:
    """Unit-gain double integrator; it has no shape."""
    return (1.0,), (1.0, 0.0, 0.0)


DOUBLE_INTEGRATOR = Structure(
    name="double integrator",
    formula="K / s^2",
    shapes=(),
    polynomials=polynomials,
    named=(),
    values=lambda shape: (),
    integrators=2,
)
