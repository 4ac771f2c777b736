"""An integrator behind a lag that dry friction holds: K / (s (T s + 1)), driven by the command less the friction."""

from .integrator_with_lag import polynomials
from .structure import Named, Shape, Structure

DRIVE_WITH_FRICTION = Structure(
    name="integrator with lag and friction",
    formula="K / (s (T s + 1)), the command less its dry friction",
    shapes=(
        Shape("time constant", "time", steps=10),
        Shape("friction forward", "command", steps=3),
        Shape("friction backward", "command", steps=3),
    ),
    polynomials=polynomials,
    named=(Named("time constant", "s"), Named("friction forward", "command"), Named("friction backward", "command")),
    values=lambda shape: shape,
    integrators=1,
    friction=True,
)
