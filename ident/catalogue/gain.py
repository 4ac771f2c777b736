"""A gain alone: K exp(-s L); the response follows faster than the sampling can show."""

from .structure import Polynomials, Structure


def polynomials(shape: tuple[float, ...]) -> Polynomials:
    """One; it has no shape."""
    return (1.0,), (1.0,)


GAIN = Structure(
    name="gain",
    formula="K",
    shapes=(),
    polynomials=polynomials,
    named=(),
    values=lambda shape: (),
)
