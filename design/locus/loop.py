"""The open loop G_L(s) whose locus is drawn: a rational function, its exact dead time and the controller's hold."""

from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from ...ident.errors import RequestError
from ...ident.plant import Plant

ComplexArray = NDArray[np.complex128]
FloatArray = NDArray[np.float64]
Points = complex | NDArray[np.complexfloating[Any, Any]] | FloatArray
Coefficients = tuple[float, ...]

_SERIES_REACH = 0.3  # below it the Bernoulli series of the hold's log derivative is more exact than the formula
_MERGE = (0.03, 1e-3, 1e-5)  # relative distances within which roots are tried as one multiple root
_UNNOTICED = 1e-13  # relative change of the coefficients that rounding may make
_ON_AXIS = 1e-11  # a root whose real part is a smaller share of its size is taken to lie on the imaginary axis


@dataclass(frozen=True)
class OpenLoop:
    """numerator(s)/denominator(s) exp(-s dead_time) times, with a hold of T seconds, (1 - exp(-s T))/(s T).

    The closed loop is 1 + K G_L(s) = 0 with K > 0: the sign of a plant with negative gain stands in the compensator.

    Attributes
    ----------
    numerator, denominator : tuple of float
        Coefficients in s (1/s units), highest power first.
    dead_time : float, s
        Of the rig and of the computation together.
    hold : float or None, s
        Sample time of the hold; None: a continuous controller.

    Raises
    ------
    RequestError
        A polynomial is empty or zero, a number is not finite, dead time or hold is negative, or the numerator is of
        higher degree than the denominator.

    Examples
    --------
    >>> loop = OpenLoop((1.0,), (1.0, 3.0, 2.0, 0.0))
    >>> round(1 / abs(complex(loop.at(1j * 2**0.5))), 12)
    6.0
    """

    numerator: Coefficients
    denominator: Coefficients
    dead_time: float = 0.0
    hold: float | None = None

    def __post_init__(self) -> None:
        object.__setattr__(self, "numerator", _stripped(self.numerator, "numerator"))
        object.__setattr__(self, "denominator", _stripped(self.denominator, "denominator"))
        if len(self.numerator) > len(self.denominator):
            raise RequestError(
                "the open loop grows without bound at high frequency",
                where="open loop",
                found=f"numerator of degree {len(self.numerator) - 1}, denominator of {len(self.denominator) - 1}",
                expected="a numerator of at most the denominator's degree",
                advice="filter the derivative part, or add the pole that the rig has",
            )
        if not (self.dead_time >= 0.0 and np.isfinite(self.dead_time)):
            raise RequestError("bad dead time", where="open loop", found=str(self.dead_time), expected="0 s or more")
        if self.hold is not None and not (self.hold > 0.0 and np.isfinite(self.hold)):
            raise RequestError("bad hold", where="open loop", found=str(self.hold), expected="more than 0 s, or None")

    @cached_property
    def poles(self) -> ComplexArray:
        """(n,) roots of the denominator, 1/s; those within rounding of the imaginary axis stand on it exactly."""
        return _roots(self.denominator)

    @cached_property
    def zeros(self) -> ComplexArray:
        """(m,) roots of the numerator, 1/s; the hold's own zeros are not among them."""
        return _roots(self.numerator)

    @property
    def leading(self) -> float:
        """Ratio of the leading coefficients."""
        return self.numerator[0] / self.denominator[0]

    @cached_property
    def _derivatives(self) -> tuple[FloatArray, FloatArray]:
        """Coefficients of N' and D'."""
        return np.polyder(np.asarray(self.numerator)), np.polyder(np.asarray(self.denominator))

    @property
    def static_gain(self) -> float:
        """Limit of s^k G_L(s) for s to zero with k poles at the origin: position, velocity, acceleration constant."""
        integrators = len(self.denominator) - len(_without_tail(self.denominator))
        return self.numerator[-1] / self.denominator[len(self.denominator) - 1 - integrators]

    @property
    def relative_degree(self) -> int:
        """Poles less zeros, the hold not counted."""
        return len(self.denominator) - len(self.numerator)

    @property
    def delay(self) -> float:
        """Total delay in s: the dead time and half of the hold."""
        return self.dead_time + 0.5 * (self.hold or 0.0)

    @property
    def rational(self) -> bool:
        """True without dead time and hold: the closed loop has finitely many poles."""
        return self.dead_time == 0.0 and self.hold is None

    def at(self, s: Points) -> ComplexArray:
        """G_L at one point or an array of points of the s plane; same shape as s."""
        s = np.asarray(s, dtype=np.complex128)
        value = np.polyval(self.numerator, s) / np.polyval(self.denominator, s) * np.exp(-s * self.dead_time)
        if self.hold is not None:
            value = value * hold_factor(s * self.hold)
        return np.asarray(value, dtype=np.complex128)

    def log_derivative(self, s: Points) -> ComplexArray:
        """G_L'(s)/G_L(s), s; same shape as s. Infinite at poles and zeros."""
        s = np.asarray(s, dtype=np.complex128)
        above, below = self._derivatives
        value = np.asarray(np.polyval(above, s) / np.polyval(self.numerator, s), dtype=np.complex128)
        value = value - np.polyval(below, s) / np.polyval(self.denominator, s) - self.dead_time
        if self.hold is not None:
            value = value + self.hold * hold_log_derivative(s * self.hold)
        return np.asarray(value, dtype=np.complex128)


def open_loop(
    plant: Plant,
    numerator: Coefficients = (1.0,),
    denominator: Coefficients = (1.0,),
    *,
    computation_delay: float = 0.0,
    hold: float | None = None,
) -> OpenLoop:
    """The open loop of a compensator in front of a plant.

    Parameters
    ----------
    plant : Plant
    numerator, denominator : tuple of float
        Of the compensator, leading coefficients of one times the sign of the plant's gain.
    computation_delay : float, s
    hold : float or None, s

    Examples
    --------
    >>> open_loop(Plant((2.0,), (0.5, 1.0), 0.1), (1.0, 3.0), (1.0, 0.0), hold=0.02).denominator
    (0.5, 1.0, 0.0)
    """
    return OpenLoop(
        tuple(float(c) for c in np.polymul(plant.numerator, numerator)),
        tuple(float(c) for c in np.polymul(plant.denominator, denominator)),
        plant.dead_time + computation_delay,
        hold,
    )


def hold_factor(x: ComplexArray) -> ComplexArray:
    """(1 - exp(-x))/x with x = s T, exact to rounding near x = 0 and near its zeros at x = 2 pi j k."""
    small = x == 0.0
    safe = np.where(small, 1.0, x)
    return np.asarray(np.where(small, 1.0, -np.expm1(-safe) / safe), dtype=np.complex128)


def hold_log_derivative(x: ComplexArray) -> ComplexArray:
    """d/dx ln((1 - exp(-x))/x) = 1/(exp(x) - 1) - 1/x.

    Near zero the Bernoulli series -1/2 + x/12 - x^3/720 + x^5/30240 - x^7/1209600 + x^9/47900160 is used.
    """
    near = np.abs(x) < _SERIES_REACH
    far = np.where(near, 1.0, x)
    close = np.where(near, x, 0.0)
    square = close * close
    odd = 1 / 12 - square * (1 / 720 - square * (1 / 30240 - square * (1 / 1209600 - square / 47900160)))
    # exp(-x)/(1 - exp(-x)) or 1/(exp(x) - 1), whichever exponential cannot overflow
    right = far.real > 0
    left = np.where(right, -far, far)
    fraction = np.where(right, -np.exp(left), 1.0) / np.expm1(left)
    return np.asarray(np.where(near, -0.5 + close * odd, fraction - 1.0 / far), dtype=np.complex128)


def _stripped(polynomial: Coefficients, name: str) -> Coefficients:
    values = tuple(float(c) for c in polynomial)
    if not all(np.isfinite(values)):
        raise RequestError("a coefficient is not finite", where=f"open loop, {name}", found=str(values))
    first = next((i for i, c in enumerate(values) if c != 0.0), None)
    if first is None:
        raise RequestError("the polynomial is zero", where=f"open loop, {name}", found=str(values))
    return values[first:]


def _without_tail(polynomial: Coefficients) -> Coefficients:
    return tuple(np.trim_zeros(np.asarray(polynomial), "b"))


def _roots(polynomial: Coefficients) -> ComplexArray:
    roots = _merged(np.asarray(np.roots(polynomial), dtype=np.complex128), polynomial)
    on_axis = np.abs(roots.real) <= _ON_AXIS * np.abs(roots)
    return np.where(on_axis, 1j * roots.imag, roots)


def _merged(roots: ComplexArray, polynomial: Coefficients) -> ComplexArray:
    """Clusters of computed roots as one multiple root each, where the polynomial can't tell the difference."""
    monic = np.asarray(polynomial) / polynomial[0]
    for share in _MERGE:
        groups = _clusters(roots, share)
        if len(groups) == roots.size:
            continue
        means = [np.mean(roots[group]) for group in groups]
        means = [mean.real + 0j if abs(mean.imag) <= 1e-9 * abs(mean) else mean for mean in means]
        tried = np.repeat(means, [len(group) for group in groups])
        if np.all(np.abs(np.poly(tried) - monic) <= _UNNOTICED * np.poly(-np.abs(roots)).real):
            return np.asarray(tried, dtype=np.complex128)
    return roots


def _clusters(roots: ComplexArray, share: float) -> list[list[int]]:
    groups: list[list[int]] = []
    for index, root in enumerate(roots):
        home = next((g for g in groups if np.min(np.abs(roots[g] - root)) <= share * abs(root)), None)
        if home is None:
            groups.append([index])
        else:
            home.append(index)
    return groups
