"""The old and the new locus in one picture, each with the poles that were chosen on it."""

from typing import TYPE_CHECKING, NamedTuple

import numpy as np
from numpy.typing import NDArray

from ...design.locus.loop import OpenLoop
from .locus_lines import at_gain, locus_lines
from .look import SMALL, Role, colour, name_axes, sheet, strip

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

ComplexArray = NDArray[np.complex128]
WIDE, TALLEST, LOWEST = 5.6, 4.3, 2.6


class Locus(NamedTuple):
    """One locus of the picture.

    Attributes
    ----------
    loop : OpenLoop
    gain : float
        K that is, or was, chosen.
    point : complex, 1/s
        The chosen pole.
    """

    loop: OpenLoop
    gain: float
    point: complex


def two_loci(before: Locus, after: Locus) -> "Figure":
    """Draw both over one window that holds both chosen points and the roots near them.

    Parameters
    ----------
    before, after : Locus

    Returns
    -------
    Figure
        Before: broken lines, open marks. After: full lines, filled marks.
    """
    view = _view(before, after)
    left, right, low, high = view
    tall = WIDE * (high - low) / (right - left)
    figure = sheet(tall + 0.6)
    axes = strip(figure, (0.75, 0.45, WIDE, tall))
    axes.set_xlim(left, right)
    axes.set_ylim(low, high)
    for level in (axes.axhline, axes.axvline):
        level(0.0, color=colour("ink"), linewidth=0.5)
    _draw(axes, before, view, "setpoint", "before", filled=False)
    _draw(axes, after, view, "model", "after", filled=True)
    name_axes(axes, x="real part (1/s)", y="imaginary part (1/s)")
    return figure


def _draw(
    axes: "Axes", locus: Locus, view: tuple[float, float, float, float], role: Role, name: str, *, filled: bool
) -> None:
    lines = locus_lines(locus.loop, view)
    for line in lines:
        style = "-" if filled else (0, (5, 3))
        axes.plot(line.real, line.imag, color=colour(role), linewidth=1.3 if filled else 1.0, linestyle=style)
    face = colour(role) if filled else colour("paper")
    for marker, roots in (("x", locus.loop.poles), ("o", locus.loop.zeros)):
        shown = np.asarray(roots)
        axes.plot(shown.real, shown.imag, linestyle="none", marker=marker, markersize=6 if filled else 8, zorder=5,
                  markeredgecolor=colour(role), markerfacecolor="none", markeredgewidth=1.3)  # fmt: skip
    poles = np.append(at_gain(locus.loop, lines, locus.gain), [locus.point, locus.point.conjugate()])
    axes.plot(poles.real, poles.imag, linestyle="none", marker="D", markersize=6, zorder=7,
              markeredgecolor=colour(role), markerfacecolor=face)  # fmt: skip
    axes.annotate(
        name, (locus.point.real, abs(locus.point.imag)), xytext=(10, -8 if filled else 5), textcoords="offset points",
        ha="left", fontsize=SMALL + 1, fontweight="bold", color=colour(role), zorder=6,
        bbox={"facecolor": colour("paper"), "edgecolor": "none", "pad": 1.0},
    )  # fmt: skip


def _view(before: Locus, after: Locus) -> tuple[float, float, float, float]:
    """Left, right, lower and upper end: both points and the roots of their own scale, one scale on both axes."""
    scale = max(abs(before.point), abs(after.point), 1e-12)
    roots = np.concatenate([[one.point, *one.loop.poles, *one.loop.zeros] for one in (before, after)])
    near = roots[np.abs(roots) < 4.0 * scale]
    reach = 1.35 * float(np.max(np.abs(near)))
    high = max(1.5 * float(np.max(near.imag)), 0.45 * reach)
    left, right, low = -reach, 0.45 * reach, -0.22 * high
    wide, tall = right - left, high - low
    more_wide, more_tall = max(0.0, tall * WIDE / TALLEST - wide), max(0.0, wide * LOWEST / WIDE - tall)
    return left - 0.7 * more_wide, right + 0.3 * more_wide, low - 0.2 * more_tall, high + 0.8 * more_tall
