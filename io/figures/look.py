"""The look that all pictures share: one colour a quantity, hairlines, direct labels, units on each axis."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Literal

import numpy as np

from .words import plain

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

Role = Literal["ink", "faint", "paper", "response", "model", "command", "setpoint", "limit", "holds"]
Ground = Literal["light", "dark"]

PALETTE: dict[Role, dict[Ground, str]] = {
    "ink": {"light": "#1d2733", "dark": "#e6ebf0"},
    "faint": {"light": "#b9c0c7", "dark": "#45535f"},
    "paper": {"light": "#fbfaf6", "dark": "#101b26"},
    "response": {"light": "#1f6fb2", "dark": "#7cc4ff"},
    "model": {"light": "#b95306", "dark": "#f08c3a"},
    "command": {"light": "#6d2a78", "dark": "#b583d6"},
    "setpoint": {"light": "#5d6873", "dark": "#a9b4bf"},
    "limit": {"light": "#9b1030", "dark": "#ff7a8a"},
    "holds": {"light": "#2f7f79", "dark": "#4fb8ae"},
}
"""Each quantity's colour on light and on dark ground; a colour is never the only carrier of a meaning."""

DASHES: dict[Role, str | tuple[int, tuple[float, ...]]] = {
    "response": "-",
    "model": "-",
    "command": "-",
    "setpoint": (0, (6, 3)),
    "limit": (0, (9, 2.5, 1.5, 2.5)),
}
WIDTH_IN = 7.2
SMALL, TEXT = 7.5, 8.5
BAND_ALPHA = 0.22


def colour(role: Role) -> str:
    """The role's colour on light ground; in SVG it becomes a variable that follows the page."""
    return PALETTE[role]["light"]


def sheet(height_in: float, width_in: float = WIDTH_IN) -> "Figure":
    """An empty figure of our size, on no ground of its own, with a canvas that needs no screen."""
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    figure = Figure(figsize=(width_in, height_in), dpi=100, facecolor="none")
    FigureCanvasAgg(figure)
    return figure


def strip(figure: "Figure", box: tuple[float, float, float, float], *, frame: bool = True) -> "Axes":
    """Axes in a box (left, bottom, width, height in inches), with two hairline edges or with none."""
    width, height = figure.get_size_inches()
    left, bottom, wide, high = box
    axes = figure.add_axes((left / width, bottom / height, wide / width, high / height), facecolor="none")
    for side, spine in axes.spines.items():
        spine.set_visible(frame and side in ("left", "bottom"))
        spine.set_color(colour("ink"))
        spine.set_linewidth(0.6)
    axes.tick_params(labelsize=SMALL, color=colour("ink"), labelcolor=colour("ink"), width=0.6, length=3)
    if frame:
        axes.ticklabel_format(useOffset=False, scilimits=(-4, 5))
    else:
        axes.set_xticks([])
        axes.set_yticks([])
    return axes


def name_axes(axes: "Axes", *, x: str = "", y: str = "") -> None:
    """Label the axes; the texts are data and nothing in them is markup."""
    style: dict[str, Any] = {"fontsize": TEXT, "color": colour("ink")}
    if x:
        axes.set_xlabel(_lines(x), labelpad=2, **style)
    if y:
        axes.set_ylabel(_lines(y), labelpad=3, **style)


def _lines(text: str) -> str:
    return "\n".join(plain(part) for part in text.split("\n"))


def hide_time(axes: "Axes") -> None:
    """Leave out the time labels of a strip that stands above another of the same time."""
    axes.tick_params(axis="x", labelbottom=False)


@dataclass(frozen=True)
class EndLabel:
    """A curve's name at its right end.

    Attributes
    ----------
    y : float, in data units
    text : str
    role : Role
    """

    y: float
    text: str
    role: Role


def label_ends(axes: "Axes", labels: Sequence[EndLabel], *, line_in: float = 0.145) -> None:
    """Write the curves' names beside their ends, moved apart where they would touch; limits of y must be set before."""
    figure = axes.get_figure(root=True)
    if figure is None:
        return
    low, high = axes.get_ylim()
    tall = axes.get_position().height * figure.get_size_inches()[1]
    ordered = sorted((label for label in labels if np.isfinite(label.y)), key=lambda label: label.y)
    wished = [(label.y - low) / (high - low) * tall for label in ordered]
    for label, place in zip(ordered, apart(wished, line_in, 0.0, tall), strict=True):
        axes.text(
            1.012, place / tall, _lines(label.text), transform=axes.transAxes, va="center", ha="left",
            fontsize=SMALL, color=colour(label.role),
        )  # fmt: skip


def apart(wished: Sequence[float], gap: float, low: float, high: float) -> list[float]:
    """Ascending places moved as little as a two-way sweep does, so that neighbours stand `gap` apart.

    Examples
    --------
    >>> apart([0.0, 0.1, 3.0], 1.0, 0.0, 4.0)
    [0.0, 1.0, 3.0]
    >>> apart([3.9, 4.0], 1.0, 0.0, 4.0)
    [3.0, 4.0]
    """
    places = [min(max(place, low), high) for place in wished]
    for i in range(1, len(places)):
        places[i] = max(places[i], places[i - 1] + gap)
    ceiling = high
    for i in range(len(places) - 1, -1, -1):
        places[i] = min(places[i], ceiling)
        ceiling = places[i] - gap
    return places


def time_scale(span: float) -> tuple[float, str]:
    """Factor and unit in which a stretch of `span` seconds reads well.

    Examples
    --------
    >>> time_scale(0.05)
    (1000.0, 'ms')
    >>> time_scale(40.0)
    (1.0, 's')
    """
    if span < 0.5:
        return 1e3, "ms"
    if span > 3 * 3600.0:
        return 1.0 / 3600.0, "h"
    return 1.0, "s"


def limits_around(*values: object, margin: float = 0.06) -> tuple[float, float]:
    """Ends of an axis that holds all finite values, with a margin; never empty."""
    finite = [part[np.isfinite(part)] for part in (np.asarray(value, dtype=float).ravel() for value in values)]
    held = np.concatenate(finite) if finite else np.zeros(0)
    if held.size == 0:
        return -1.0, 1.0
    low, high = float(held.min()), float(held.max())
    room = margin * (high - low) if high > low else max(abs(high), 1.0) * margin
    return low - room, high + room
