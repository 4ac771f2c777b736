"""The gain ribbon: a strip over the logarithm of the loop gain, one row a requirement, filled where it holds."""

import math
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

from ...design.designed import GainInterval, Selection
from .look import SMALL, TEXT, colour, sheet, strip
from .words import number, plain, with_unit

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

LEFT, WIDE, ROW = 1.75, 5.05, 0.235


def gain_ribbon(selection: Selection) -> "Figure":
    """Draw where each requirement holds over the loop gain, where all do, and the chosen gain.

    Parameters
    ----------
    selection : Selection

    Returns
    -------
    Figure
    """
    rows = selection.rows
    tall = ROW * (len(rows) + 2) + 0.12
    figure = sheet(tall + 0.85)
    axes = strip(figure, (LEFT, 0.5, WIDE, tall))
    low, high = ribbon_span(selection)
    axes.set_xscale("log")
    axes.set_xlim(low, high)
    axes.set_ylim(len(rows) + 2.0, -0.5)
    for place, (name, intervals) in enumerate(rows):
        _row(axes, place, name.replace("_", " "), intervals, (low, high), height=0.46)
    _row(axes, len(rows) + 0.4, "all together", selection.intervals, (low, high), height=0.72, strong=True)
    plausible = selection.intervals_plausible
    _row(axes, len(rows) + 1.4, "on plausible plants", plausible, (low, high), height=0.72, hatched=True)
    axes.axhline(len(rows) - 0.2, color=colour("ink"), linewidth=0.6)
    _chosen(axes, selection)
    _scale(axes, selection)
    return figure


def ribbon_span(selection: Selection) -> tuple[float, float]:
    """Ends of the ribbon: the chosen gain and every finite edge near it, with room at both sides."""
    chosen = selection.loop_gain
    every = [*selection.intervals, *selection.intervals_plausible]
    every += [interval for _, intervals in selection.rows for interval in intervals]
    edges = [edge for interval in every for edge in interval if edge is not None and edge > 0.0]
    near = [edge for edge in edges if chosen / 100.0 < edge < chosen * 100.0]
    low, high = min([chosen / 2.0, *near]), max([chosen * 2.0, *near])
    room = (high / low) ** 0.08
    return low / room, high * room


def _row(
    axes: "Axes", place: float, name: str, intervals: Sequence[GainInterval], span: tuple[float, float],
    *, height: float, strong: bool = False, hatched: bool = False,
) -> None:  # fmt: skip
    low, high = span
    axes.plot([low, high], [place, place], color=colour("faint"), linewidth=0.7, zorder=1)
    weight = "bold" if strong or hatched else "normal"
    axes.annotate(
        plain(name), (0.0, place), xycoords=("axes fraction", "data"), xytext=(-6, 0), textcoords="offset points",
        ha="right", va="center", fontsize=TEXT, color=colour("ink"), fontweight=weight, annotation_clip=False,
    )  # fmt: skip
    for first, last in intervals:
        left, right = max(first or low, low), min(last if last is not None else high, high)
        if right <= left:
            continue
        _bar(axes, place, left, right, height=height, hatched=hatched)
        _ends(axes, place, height, left if first and first >= low else None, right if last and last <= high else None)
    if not intervals:
        axes.text(math.sqrt(low * high), place, "at no gain", ha="center", va="center", fontsize=SMALL,
                  color=colour("limit"), backgroundcolor="none")  # fmt: skip


def _bar(axes: "Axes", place: float, left: float, right: float, *, height: float, hatched: bool) -> None:
    style: dict[str, Any] = {"facecolor": "none" if hatched else colour("holds"), "edgecolor": colour("holds")}
    axes.barh(
        place, right - left, left=left, height=height, linewidth=0.8 if hatched else 0.0,
        hatch="/////" if hatched else None, zorder=2, **style,
    )  # fmt: skip


def _ends(axes: "Axes", place: float, height: float, left: float | None, right: float | None) -> None:
    """A solid end mark where the requirement stops holding; none where it goes on beyond the ribbon."""
    for edge in (left, right):
        if edge is not None:
            axes.plot([edge, edge], [place - 0.42, place + 0.42], color=colour("ink"), linewidth=1.0, zorder=3)


def _chosen(axes: "Axes", selection: Selection) -> None:
    axes.axvline(selection.loop_gain, color=colour("model"), linewidth=1.4, zorder=4)
    axes.annotate(
        plain(f"chosen K = {with_unit(selection.loop_gain, selection.loop_gain_unit)}"),
        (selection.loop_gain, 1.0), xycoords=("data", "axes fraction"), xytext=(0, 4), textcoords="offset points",
        ha="center", va="bottom", fontsize=TEXT, color=colour("model"), fontweight="bold", annotation_clip=False,
    )  # fmt: skip
    axes.plot([selection.loop_gain], [len(selection.rows) + 0.4], marker="D", markersize=6, color=colour("model"),
              markeredgecolor=colour("paper"), zorder=5)  # fmt: skip


def _scale(axes: "Axes", selection: Selection) -> None:
    from matplotlib.ticker import FixedLocator, NullFormatter, NullLocator

    axes.spines["left"].set_visible(False)
    axes.set_yticks([])
    marks = ticks_of(*axes.get_xlim())
    axes.xaxis.set_major_locator(FixedLocator(marks))
    axes.xaxis.set_minor_locator(NullLocator())
    axes.xaxis.set_minor_formatter(NullFormatter())
    axes.set_xticklabels([number(mark) for mark in marks])
    unit = "" if selection.loop_gain_unit in ("", "1") else f" ({selection.loop_gain_unit})"
    for place, side, text in ((0.0, "left", "← lower K"), (1.0, "right", "higher K →")):
        axes.annotate(
            text, (place, 0.0), xycoords="axes fraction", xytext=(0, -22), textcoords="offset points", ha=side,
            va="center", fontsize=TEXT, color=colour("ink"), annotation_clip=False,
        )  # fmt: skip
    axes.set_xlabel(plain(f"loop gain K{unit}, logarithmic"), fontsize=TEXT, color=colour("ink"), labelpad=3)


def ticks_of(low: float, high: float) -> list[float]:
    """Round gains between the ends: 1, 2, 5 of each decade, or decades alone over a wide span.

    Examples
    --------
    >>> ticks_of(0.9, 22.0)
    [1.0, 2.0, 5.0, 10.0, 20.0]
    """
    decades = range(math.floor(math.log10(low)), math.ceil(math.log10(high)) + 1)
    wide = high / low
    steps = (1.0,) if wide > 1e3 else (1.0, 2.0, 5.0) if wide > 15.0 else (1.0, 1.5, 2.0, 3.0, 4.0, 5.0, 7.0)
    every = [float(f"{step}e{decade}") for decade in decades for step in steps]
    return [mark for mark in every if low <= mark <= high]
