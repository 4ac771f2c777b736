"""A frequency table as a value: the response of a rig at single frequencies, and how surely it is known."""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from .plant import ComplexArray
from .run import FloatArray

# Coherence is printed to three digits at best: nearer to one than this it tells no more.
_DIGITS = 5e-4


@dataclass(frozen=True, eq=False)
class Table:
    """One measured frequency response.

    Attributes
    ----------
    label : str
    frequency : (m,) array, rad/s, increasing, above zero
    magnitude : (m,) array, response unit per command unit, above zero
    phase : (m,) array, rad, or None
        Lag negative. None: the table gives magnitudes only.
    magnitude_error : (m,) array or None, response unit per command unit
        Standard error.
    phase_error : (m,) array or None, rad
        Standard error.
    coherence : (m,) array or None
        Squared coherence, 0 to 1.

    Notes
    -----
    Stated errors count as they are. Of an error that is not stated, the other gives it: an error of the response that
    is even in all directions is as large along the phase (in rad) as along the magnitude (relative). Coherence gives
    the errors' course over frequency, sqrt((1 - g2)/(2 g2)), but without the number of averages not their size; where
    nothing is stated all relative errors are taken as equal. Such a size is estimated from the residual.

    References
    ----------
    Bendat and Piersol, Random Data, chapter on random errors of estimates: error of |H| over |H|, and of the phase in
    rad, sqrt((1 - g2)/(2 g2 nd)) (from memory).
    """

    label: str
    frequency: FloatArray
    magnitude: FloatArray
    phase: FloatArray | None = None
    magnitude_error: FloatArray | None = None
    phase_error: FloatArray | None = None
    coherence: FloatArray | None = None

    @property
    def sized(self) -> bool:
        """Whether the errors have a size of their own; else only their course is known."""
        return self.magnitude_error is not None or self.phase_error is not None

    @cached_property
    def response(self) -> ComplexArray:
        """(m,) measured response; real where no phase is given."""
        turned = 0.0 if self.phase is None else self.phase
        return np.asarray(self.magnitude * np.exp(1j * turned), dtype=np.complex128)

    @cached_property
    def relative_errors(self) -> tuple[FloatArray, FloatArray]:
        """(m,) of the magnitude, relative, and of the phase, rad; up to a common factor where not `sized`."""
        if self.magnitude_error is not None:
            along = self.magnitude_error / self.magnitude
            return along, along if self.phase_error is None else self.phase_error
        if self.phase_error is not None:
            return self.phase_error, self.phase_error
        if self.coherence is not None:
            seen = np.minimum(self.coherence, 1.0 - _DIGITS)
            course = np.sqrt((1.0 - seen) / (2.0 * seen))
            return course, course
        return np.full(len(self.frequency), 0.01), np.full(len(self.frequency), 0.01)

    @property
    def span(self) -> tuple[float, float]:
        """Lowest and highest frequency, rad/s."""
        return float(self.frequency[0]), float(self.frequency[-1])


@dataclass(frozen=True, eq=False)
class FittedTable:
    """One fitted table beside its model.

    Attributes
    ----------
    label : str
    frequency : (m,) array, rad/s
    magnitude : (m,) array, response unit per command unit
    phase : (m,) array, rad, or None
    magnitude_error : (m,) array, response unit per command unit
        Standard errors as used: stated, or from the residual.
    phase_error : (m,) array, rad
    model : (m,) complex array
        The fitted plant at the same frequencies, dead time included.
    """

    label: str
    frequency: FloatArray
    magnitude: FloatArray
    phase: FloatArray | None
    magnitude_error: FloatArray
    phase_error: FloatArray
    model: ComplexArray


def rows_of(table: Table, phase: FloatArray, model: ComplexArray) -> FloatArray:
    """A complex model, (m,) or (m, q), as real rows in standard errors: along the measured response, then across it.

    Along is where magnitude errors lie, across where phase errors do, while both are small. A table without a phase
    has the first half only, along a `phase` that something else tells.

    Returns
    -------
    (2 m,) or (2 m, q) array; half as many rows for a table without phase
    """
    of_magnitude, of_phase = table.relative_errors
    shape = (-1,) + (1,) * (model.ndim - 1)
    turned = model * (np.exp(-1j * phase) / table.magnitude).reshape(shape)
    along = turned.real / of_magnitude.reshape(shape)
    if table.phase is None:
        return np.asarray(along)
    return np.concatenate([along, turned.imag / of_phase.reshape(shape)])


def usable_points(table: Table, worst: float) -> NDArray[np.bool_]:
    """(m,) mask of points whose stated errors are at most `worst`, relative: small in every direction."""
    if not table.sized:
        return np.ones(len(table.frequency), dtype=bool)
    return np.asarray((table.relative_errors[0] <= worst) & (table.relative_errors[1] <= worst))
