"""The locus with the chosen point, and the vectors whose lengths the magnitude condition multiplies."""

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from ...design.locus.condition import Vector, Working
from .look import SMALL, Role, colour, name_axes, sheet, strip
from .words import number

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

ComplexArray = NDArray[np.complex128]
View = tuple[float, float, float, float]
WIDE, TALLEST, LOWEST = 5.6, 4.3, 2.6


def locus(
    branches: Sequence[ComplexArray],
    working: Working,
    *,
    sampled_pole: complex | None = None,
    others: Sequence[complex] = (),
) -> "Figure":
    """Draw the branches over growing K, the open loop's roots, the chosen point and the vectors that lead to it.

    Parameters
    ----------
    branches : sequence of (m,) complex arrays, 1/s
        Each in order of growing K.
    working : Working
        The magnitude condition written out at the chosen point.
    sampled_pole : complex or None, 1/s
        The exact pole of the sampled loop, ln z / T.
    others : sequence of complex, 1/s
        Closed-loop poles at the chosen gain; those at the chosen point are left out.

    Returns
    -------
    Figure
    """
    view = view_of(working)
    left, right, low, high = view
    tall = WIDE * (high - low) / (right - left)
    figure = sheet(tall + 0.6)
    axes = strip(figure, (0.75, 0.45, WIDE, tall))
    axes.set_xlim(left, right)
    axes.set_ylim(low, high)
    for level in (axes.axhline, axes.axvline):
        level(0.0, color=colour("ink"), linewidth=0.5)
    for branch in branches:
        _branch(axes, branch, view)
    _vectors(axes, working, view)
    _roots(axes, working, view)
    _beyond(axes, working, view)
    _others(axes, working.point, others)
    _point(axes, working.point, sampled_pole)
    name_axes(axes, x="real part (1/s)", y="imaginary part (1/s)")
    return figure


def view_of(working: Working) -> View:
    """Left, right, lower and upper end of the shown part of the plane: the point and the roots of its own scale."""
    point = complex(working.point.real, abs(working.point.imag))
    scale = max(abs(point), 1e-12)
    roots = [vector.root for vector in (*working.poles, *working.zeros) if abs(vector.root) < 4.0 * scale]
    reach = 1.35 * max([abs(point), *(abs(root) for root in roots)])
    high = max(1.5 * point.imag, *(1.2 * abs(root.imag) for root in roots), 0.45 * reach) if roots else 1.5 * scale
    low = -max([0.22 * high, *(-1.2 * root.imag for root in roots)])
    return _widened(-reach, 0.45 * reach, low, high)


def _widened(left: float, right: float, low: float, high: float) -> View:
    """The window made wider or taller, so that both axes have one scale inside the least and the greatest height."""
    wide, tall = right - left, high - low
    more_wide = max(0.0, tall * WIDE / TALLEST - wide)
    more_tall = max(0.0, wide * LOWEST / WIDE - tall)
    return left - 0.7 * more_wide, right + 0.3 * more_wide, low - 0.2 * more_tall, high + 0.8 * more_tall


def tags(working: Working) -> list[tuple[str, Vector]]:
    """The vectors with the names they have in picture and table: p1, p2, ... and z1, z2, ...

    A pole or zero of several orders is named once for each.
    """
    poles = [(f"p{place + 1}", vector) for place, vector in enumerate(working.poles)]
    return poles + [(f"z{place + 1}", vector) for place, vector in enumerate(working.zeros)]


def _branch(axes: "Axes", branch: ComplexArray, view: View) -> None:
    axes.plot(branch.real, branch.imag, color=colour("ink"), linewidth=1.0, zorder=2)
    left, right, low, high = view
    inside = (branch.real > left) & (branch.real < right) & (branch.imag > low) & (branch.imag < high)
    shown = branch[inside]
    if shown.size < 3:
        return
    way = np.concatenate([[0.0], np.cumsum(np.abs(np.diff(shown)))])
    if not way[-1] > 0.08 * (right - left):
        return
    at = max(1, int(np.searchsorted(way, 0.5 * way[-1])))
    first, second = shown[at - 1], shown[at]
    axes.annotate(
        "", (second.real, second.imag), xytext=(first.real, first.imag), zorder=3,
        arrowprops={"arrowstyle": "-|>", "color": colour("ink"), "linewidth": 0.0, "mutation_scale": 9,
                    "shrinkA": 0, "shrinkB": 0},
    )  # fmt: skip


def _vectors(axes: "Axes", working: Working, view: View) -> None:
    point = working.point
    for place, (name, vector) in enumerate(tags(working)):
        root = vector.root
        role: Role = "command" if name.startswith("p") else "holds"
        dash = "-" if name.startswith("p") else (0, (4, 2))
        axes.plot([root.real, point.real], [root.imag, point.imag], color=colour(role), linestyle=dash, linewidth=0.8)
        if not _inside(root, view) or vector.length < 0.08 * (view[1] - view[0]):
            continue
        at = root + (0.3 + 0.2 * (place % 3)) * (point - root)
        axes.text(
            at.real, at.imag, f"{name}: {number(vector.length, 3)}", fontsize=SMALL, color=colour(role),
            ha="center", va="bottom", rotation=_upright(vector.angle_deg), rotation_mode="anchor", zorder=6,
        )  # fmt: skip


def _beyond(axes: "Axes", working: Working, view: View) -> None:
    """Name the roots that stand outside of the picture; their vectors leave over its edge."""
    left, _, low, _ = view
    outside = [(name, vector.root) for name, vector in tags(working) if not _inside(vector.root, view)]
    if outside:
        far = [f"{name} at {number(root.real, 3)}" for name, root in outside]
        axes.text(left, low, f" beyond the picture: {', '.join(far)} 1/s", fontsize=SMALL, color=colour("ink"),
                  ha="left", va="bottom", zorder=6)  # fmt: skip


def _upright(angle: float) -> float:
    return angle - 180.0 if angle > 90.0 else angle + 180.0 if angle < -90.0 else angle


def _inside(root: complex, view: View) -> bool:
    left, right, low, high = view
    return left <= root.real <= right and low <= root.imag <= high


def _roots(axes: "Axes", working: Working, view: View) -> None:
    for marker, vectors, size in (("x", working.poles, 6.5), ("o", working.zeros, 6.0)):
        inside = [vector.root for vector in vectors if _inside(vector.root, view)]
        axes.plot(
            [root.real for root in inside], [root.imag for root in inside], linestyle="none", marker=marker,
            markersize=size, markeredgewidth=1.5, markeredgecolor=colour("ink"), markerfacecolor="none", zorder=5,
        )  # fmt: skip


def _others(axes: "Axes", point: complex, others: Sequence[complex]) -> None:
    away = [s for s in others if abs(s - point) > 1e-2 * abs(point)]
    axes.plot([s.real for s in away], [s.imag for s in away], linestyle="none", marker="D", markersize=5, zorder=6,
              markerfacecolor=colour("paper"), markeredgecolor=colour("model"))  # fmt: skip


def _point(axes: "Axes", point: complex, sampled: complex | None) -> None:
    style: dict[str, Any] = {"linestyle": "none", "marker": "D", "zorder": 7, "markeredgecolor": colour("model")}
    axes.plot([point.real], [point.imag], markersize=7, markerfacecolor=colour("model"), **style)
    if sampled is not None:
        axes.plot([sampled.real], [sampled.imag], linestyle="none", marker="s", markersize=9, zorder=7,
                  markeredgecolor=colour("response"), markerfacecolor="none", markeredgewidth=1.2)  # fmt: skip
    axes.annotate(
        "chosen", (point.real, point.imag), xytext=(-9, 7), textcoords="offset points", ha="right", va="bottom",
        fontsize=SMALL + 1, fontweight="bold", color=colour("model"),
    )  # fmt: skip
