"""Stability margins and peak sensitivity of a continuous loop K G_L with its exact dead time.

Least over all crossings, intersected with stability: a loop that is unstable has no positive margin, however its curve
crosses.
"""

import math
from dataclasses import dataclass

import numpy as np

from ..ident.errors import RequestError
from .locus.enclosure import unpaired
from .locus.loop import ComplexArray, FloatArray, OpenLoop
from .locus.stability import stable_gain_intervals

_STEP = 0.05  # largest change of ln G_L between neighbours of the mesh
_MOST_POINTS = 200_000
_SECTION = 0.5 * (3.0 - math.sqrt(5.0))


@dataclass(frozen=True)
class Margins:
    """Margins of 1 + K G_L at one K.

    Attributes
    ----------
    stable : bool
    gain_margin : float
        Smallest factor, above one, by which K may grow or shrink up to instability. Below one for an unstable loop: the
        factor to the nearest stable K. Infinite without limit, zero where no K is stable.
    critical_gain_above, critical_gain_below : float or None
        Ends of the stable interval that holds K; None: unbounded, and zero below.
    phase_margin_deg : float
        Smallest turn of the angle, either way, that brings a gain crossover to -1; minus that for an unstable loop;
        infinite without crossover.
    phase_crossover : float or None, rad/s
        The gain crossover of that phase margin.
    delay_margin : float, s
        Smallest additional dead time up to instability; zero for an unstable loop, infinite without crossover.
    peak_sensitivity : float
        Largest |1/(1 + K G_L)| over all frequencies; infinite for an unstable loop.
    peak_frequency : float, rad/s
        Where; infinite when it is approached at high frequency only.
    peak_complementary : float
        Largest |K G_L/(1 + K G_L)|; infinite for an unstable loop.
    """

    stable: bool
    gain_margin: float
    critical_gain_above: float | None
    critical_gain_below: float | None
    phase_margin_deg: float
    phase_crossover: float | None
    delay_margin: float
    peak_sensitivity: float
    peak_frequency: float
    peak_complementary: float

    @property
    def gain_margin_db(self) -> float:
        """20 log10 of the gain margin; minus infinity where no K is stable."""
        return 20.0 * math.log10(self.gain_margin) if self.gain_margin > 0.0 else -math.inf


def margins(loop: OpenLoop, loop_gain: float) -> Margins:
    """Every margin of the loop at this K.

    Raises
    ------
    RequestError
        The gain is not positive.

    Examples
    --------
    >>> found = margins(OpenLoop((1.0,), (1.0, 6.0, 5.0, 0.0)), 10.0)
    >>> round(found.gain_margin, 9), round(found.phase_margin_deg, 2)
    (3.0, 25.39)
    """
    if not (loop_gain > 0.0 and math.isfinite(loop_gain)):
        raise RequestError("the loop gain must be positive", where="margins", found=str(loop_gain), expected="K > 0")
    intervals = stable_gain_intervals(loop)
    home = next(((a, b) for a, b in intervals if a < loop_gain and (b is None or loop_gain < b)), None)
    turn, crossover, delay = _phase(loop, loop_gain)
    if home is None:
        factor = _factor_to_stability(intervals, loop_gain)
        return Margins(False, factor, None, None, -turn, crossover, 0.0, math.inf, math.nan, math.inf)
    low, high = home
    factor = min(math.inf if high is None else high / loop_gain, math.inf if low == 0.0 else loop_gain / low)
    peak, at = _peak(loop, loop_gain, complementary=False)
    resonance, _ = _peak(loop, loop_gain, complementary=True)
    return Margins(True, factor, high, low, turn, crossover, delay, peak, at, resonance)


def gain_crossovers(loop: OpenLoop, loop_gain: float) -> FloatArray:
    """(k,) every frequency, rad/s, at which |K G_L| = 1, rising; touching points are left out."""
    mesh = frequency_mesh(loop, loop_gain)
    with np.errstate(divide="ignore"):
        level = np.log(loop_gain * np.abs(loop.at(1j * mesh)))
    change = np.flatnonzero(np.sign(level[1:]) * np.sign(level[:-1]) < 0)
    low, high, up = mesh[change].copy(), mesh[change + 1].copy(), level[change + 1] > 0.0
    w = 0.5 * (low + high)
    for _ in range(60):
        miss = np.log(loop_gain * np.abs(loop.at(1j * w)))
        above = (miss > 0.0) == up
        low, high = np.where(above, low, w), np.where(above, w, high)
        step = miss / -loop.log_derivative(1j * w).imag
        trial = w - step
        inside = (trial > low) & (trial < high)
        settled = (np.abs(step) <= 4e-16 * w) | (high - low <= 4e-16 * w)
        if settled.all():
            break
        w = np.where(settled, w, np.where(inside, trial, 0.5 * (low + high)))
    return w


def _phase(loop: OpenLoop, loop_gain: float) -> tuple[float, float | None, float]:
    """Phase margin, deg, its crossover, and delay margin, s."""
    crossovers = gain_crossovers(loop, loop_gain)
    stays = loop.relative_degree == 0 and loop.hold is None and loop_gain * abs(loop.leading) >= 1.0
    if crossovers.size == 0:
        return math.inf, None, 0.0 if stays else math.inf
    angle = np.asarray(np.angle(-loop.at(1j * crossovers)), dtype=np.float64)
    least = int(np.argmin(np.abs(angle)))
    delay = float(np.min(np.mod(angle, 2.0 * np.pi) / crossovers))
    return math.degrees(abs(angle[least])), float(crossovers[least]), 0.0 if stays else delay


def _factor_to_stability(intervals: tuple[tuple[float, float | None], ...], loop_gain: float) -> float:
    """Below one: K over the nearest stable gain above it, or the nearest stable gain below over K."""
    below = [high / loop_gain for _, high in intervals if high is not None and high <= loop_gain]
    above = [loop_gain / low for low, _ in intervals if low >= loop_gain]
    return max(below + above, default=0.0)


def frequency_mesh(loop: OpenLoop, loop_gain: float) -> FloatArray:
    """Frequencies, rad/s, between which ln G_L changes by at most about _STEP, however lightly damped its modes.

    |d ln G_L/d w| is at most sum 1/|j w - root| + delay, whose integral is sum asinh((w - Im root)/|Re root|) + delay
    times w; the mesh is equidistant in that.
    """
    zeros, poles, _ = unpaired(loop.zeros, loop.poles)
    roots = np.concatenate([zeros, poles, [-1.0 / loop.delay] if loop.delay > 0.0 else [-1e-30]])
    largest = float(np.max(np.abs(roots)))
    lowest = 1e-5 * float(np.min(np.abs(roots)[np.abs(roots) > 1e-20], initial=max(largest, 1.0)))
    lowest = min(lowest, 1e-3 * loop_gain * abs(loop.leading)) if not np.all(roots) else lowest
    highest = _quiet_from(loop, loop_gain, 1e3 * max(largest, 1e3 * lowest))
    coarse = np.geomspace(lowest, highest, 4000)
    beside = np.abs(roots.imag)[:, None] + np.abs(roots)[:, None] * np.array([-1e-3, -1e-6, 0.0, 1e-6, 1e-3])
    coarse = np.unique(np.concatenate([coarse, beside[(beside > lowest) & (beside < highest)].ravel()]))
    width = np.maximum(np.abs(roots.real), 1e-9 * np.maximum(np.abs(roots), lowest))
    turning = np.arcsinh((coarse[:, None] - roots.imag) / width).sum(axis=1) + loop.delay * coarse
    count = min(int((turning[-1] - turning[0]) / _STEP) + 2, _MOST_POINTS)
    even = np.interp(np.linspace(turning[0], turning[-1], count), turning, coarse)
    return np.unique(np.concatenate([even, coarse[:: max(coarse.size // 200, 1)]]))


def _quiet_from(loop: OpenLoop, loop_gain: float, highest: float) -> float:
    """A frequency from which on |K G_L| < 0.01, or 200 turns of the delay where it never gets there."""
    ceiling = max(highest, 1e4 * highest if loop.delay == 0.0 else 1256.0 / loop.delay)
    zeros, poles, _ = unpaired(loop.zeros, loop.poles)
    largest = float(np.max(np.abs(np.concatenate([zeros, poles, [1e-12]]))))
    w = 2.0 * largest + (1.0 / loop.delay if loop.delay > 0.0 else 0.0)
    while w < ceiling:
        size = loop_gain * abs(loop.leading) * np.prod(w + np.abs(zeros)) / np.prod(w - np.abs(poles))
        if size * (1.0 if loop.hold is None else min(1.0, 2.0 / (w * loop.hold))) < 0.01:
            return float(w)
        w *= 1.5
    return ceiling


def _peak(loop: OpenLoop, loop_gain: float, *, complementary: bool) -> tuple[float, float]:
    """Largest value over frequency and where: on the mesh, then by golden section around every candidate."""

    def size(w: FloatArray) -> FloatArray:
        return _closed(loop_gain * loop.at(1j * w), complementary)

    mesh = frequency_mesh(loop, loop_gain)
    value = size(mesh)
    inner = np.flatnonzero((value[1:-1] >= value[:-2]) & (value[1:-1] >= value[2:])) + 1
    inner = inner[value[inner] > 0.9 * value.max()]
    best, at = max(_ends(loop, loop_gain, complementary), (float(value.max()), float(mesh[np.argmax(value)])))
    if inner.size == 0:
        return best, at
    low, high = mesh[inner - 1], mesh[inner + 1]
    for _ in range(60):
        a, b = low + _SECTION * (high - low), high - _SECTION * (high - low)
        left = size(a) > size(b)
        low, high = np.where(left, low, a), np.where(left, b, high)
    w = 0.5 * (low + high)
    top = int(np.argmax(size(w)))
    return max((best, at), (float(size(w)[top]), float(w[top])))


def _closed(curve: ComplexArray, complementary: bool) -> FloatArray:
    return np.abs(curve / (1.0 + curve)) if complementary else np.abs(1.0 / (1.0 + curve))


def _ends(loop: OpenLoop, loop_gain: float, complementary: bool) -> tuple[float, float]:
    """The larger of the values at rest and towards infinite frequency."""
    rest = (1.0 if complementary else 0.0) if loop.denominator[-1] == 0.0 else None
    if rest is None:
        rest = float(_closed(loop_gain * loop.at(np.zeros(1)), complementary)[0])
    far = 0.0 if complementary else 1.0
    if loop.relative_degree == 0 and loop.hold is None:
        end = loop_gain * loop.leading
        end = -abs(end) if loop.dead_time > 0.0 else end  # with dead time the curve turns through every angle
        far = float(_closed(np.array([end + 0j]), complementary)[0])
    return max((rest, 0.0), (far, math.inf))
