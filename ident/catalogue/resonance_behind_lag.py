"""A resonance behind a lag, such as an actuator's: K wn^2 exp(-s L) / ((s^2 + 2 z wn s + wn^2)(T s + 1))."""

from .structure import Named, Polynomials, Shape, Structure


def polynomials(shape: tuple[float, ...]) -> Polynomials:
    """Unit gain, natural frequency shape[0], rad/s, damping ratio shape[1], time constant shape[2], s."""
    frequency, damping, lag = shape
    square, middle = 1.0 / (frequency * frequency), 2.0 * damping / frequency
    return (1.0,), (lag * square, square + lag * middle, lag + middle, 1.0)


RESONANCE_BEHIND_LAG = Structure(
    name="resonance behind a lag",
    formula="K wn^2 / ((s^2 + 2 z wn s + wn^2)(T s + 1))",
    shapes=(
        Shape("natural frequency", "frequency", steps=6),
        Shape("damping ratio", "ratio", 0.02, 0.7, steps=3),
        Shape("time constant", "time", steps=5),
    ),
    polynomials=polynomials,
    named=(Named("natural frequency", "rad/s"), Named("damping ratio", "1"), Named("time constant", "s")),
    values=lambda shape: shape,
    further=True,
)
