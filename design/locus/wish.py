"""Where to ask for a pole, and the zero or lead that the angle condition then demands."""

import cmath
import math

import numpy as np

from ...ident.errors import RequestError
from .condition import angle_residual_deg
from .loop import OpenLoop


def damping_ratio_for_overshoot(overshoot: float) -> float:
    """Damping ratio of the second-order system with this overshoot (a fraction of the step).

    overshoot = exp(-pi z/sqrt(1 - z^2)), solved for z.

    Raises
    ------
    RequestError
        The overshoot is not between zero and one.

    Examples
    --------
    >>> round(damping_ratio_for_overshoot(0.16), 4)
    0.5039
    """
    if not 0.0 < overshoot < 1.0:
        raise RequestError("no such damping ratio", where="overshoot", found=str(overshoot), expected="0 to 1")
    decrement = -math.log(overshoot)
    return decrement / math.hypot(math.pi, decrement)


def pole_for_peak(overshoot: float, peak_time: float) -> complex:
    """The second-order pole, 1/s, with this overshoot (a fraction) and peak time pi/Im(pole) (s)."""
    damping = damping_ratio_for_overshoot(overshoot)
    height = math.pi / peak_time
    return complex(-height * damping / math.sqrt(1.0 - damping**2), height)


def angle_wanted_deg(loop: OpenLoop, s: complex) -> float:
    """The angle that a compensator must add at s to put it on the locus, in [-180, 180) deg."""
    return -angle_residual_deg(loop, s)


def zero_for_point(loop: OpenLoop, s: complex) -> float:
    """z of the factor (s + z) that puts s (upper half-plane) on the locus, 1/s.

    Raises
    ------
    RequestError
        One zero can't add the angle: it is not between 0 and 180 deg.
    """
    wanted = angle_wanted_deg(loop, s)
    if not 0.0 < wanted < 180.0:
        raise RequestError(
            "one zero can't put this point on the locus",
            where=f"s = {s:.6g} 1/s",
            found=f"{wanted:.4g} deg wanted",
            expected="between 0 and 180 deg",
        )
    return float(s.imag / math.tan(math.radians(wanted)) - s.real)


def lead_by_bisector(loop: OpenLoop, s: complex) -> tuple[float, float]:
    """z and p of the lead (s + z)/(s + p) that puts s on the locus with the largest z/p, 1/s.

    The zero and the pole lie half the wanted angle to either side of the bisector between the directions from s to the
    origin and to the left; then z p = |s|^2.

    Raises
    ------
    RequestError
        One lead can't add the angle.

    References
    ----------
    Ogata, Modern Control Engineering, lead compensation by the root locus (from memory).
    """
    wanted = math.radians(angle_wanted_deg(loop, s))
    slant = cmath.phase(s)
    if not 0.0 < wanted < slant:
        raise RequestError(
            "one lead can't put this point on the locus",
            where=f"s = {s:.6g} 1/s",
            found=f"{math.degrees(wanted):.4g} deg wanted",
            expected=f"between 0 and {math.degrees(slant):.4g} deg",
        )
    zero_angle, pole_angle = 0.5 * (slant + wanted), 0.5 * (slant - wanted)
    return (
        float(s.imag / np.tan(zero_angle) - s.real),
        float(s.imag / np.tan(pole_angle) - s.real),
    )
