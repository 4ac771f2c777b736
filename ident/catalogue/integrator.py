"""An integrator: K exp(-s L) / s."""

from .structure import Polynomials, Structure


def polynomials(shape: tuple[float, ...]) -> Polynomials:
    """Unit-gain integrator; it has no shape."""
    return (1.0,), (1.0, 0.0)


INTEGRATOR = Structure(
    name="integrator",
    formula="K / s",
    shapes=(),
    polynomials=polynomials,
    named=(),
    values=lambda shape: (),
    integrators=1,
)
