"""The margins: size, angle and sensitivity of the loop over frequency, each with the room that is left marked on it."""

from typing import TYPE_CHECKING, Any

import numpy as np

from ...design.loop_response import LoopResponse, Mark
from ...design.sweep import Band
from ...ident.run import FloatArray
from .gain_ribbon import ticks_of
from .look import BAND_ALPHA, SMALL, colour, hide_time, limits_around, name_axes, sheet, strip
from .words import number

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

LEFT, WIDE = 0.86, 5.9


def margins(response: LoopResponse) -> "Figure":
    """Draw how large the loop is, how far it is from turning round, and how much it amplifies.

    Parameters
    ----------
    response : LoopResponse

    Returns
    -------
    Figure
    """
    figure = sheet(5.0)
    size = strip(figure, (LEFT, 3.5, WIDE, 1.35))
    _curve(size, response.frequency, _db(response.size), Band(_db(response.sizes.low), _db(response.sizes.high)))
    turn = strip(figure, (LEFT, 1.85, WIDE, 1.5))
    _curve(turn, response.frequency, response.turn, response.turns, low=-60.0)
    swell = strip(figure, (LEFT, 0.5, WIDE, 1.2))
    _curve(swell, response.frequency, response.sensitivity, response.sensitivities)
    for axes, level in ((size, 0.0), (turn, 0.0), (swell, 1.0)):
        axes.axhline(level, color=colour("ink"), linewidth=0.7)
    _gain(size, turn, response.gain_margin)
    _phase(size, turn, response.phase_margin)
    _peak(swell, response.peak)
    name_axes(size, y="size of the loop\n(dB)")
    name_axes(turn, y="angle above\n−180 deg (deg)")
    name_axes(swell, x="angular frequency (rad/s), logarithmic", y="sensitivity\n(ratio)")
    hide_time(size)
    hide_time(turn)
    return figure


def _db(size: FloatArray) -> FloatArray:
    return np.asarray(20.0 * np.log10(np.maximum(size, 1e-12)))


def _curve(axes: "Axes", frequency: FloatArray, values: FloatArray, band: Band, *, low: float | None = None) -> None:
    axes.set_xscale("log")
    axes.set_xlim(frequency[0], frequency[-1])
    axes.fill_between(frequency, band.low, band.high, color=colour("model"), alpha=BAND_ALPHA, linewidth=0.4)
    axes.plot(frequency, values, color=colour("model"), linewidth=1.3)
    least, most = limits_around(band.low, band.high, values, 0.0, margin=0.08)
    axes.set_ylim(least if low is None else max(least, low), most)
    _ticks(axes)


def _ticks(axes: "Axes") -> None:
    from matplotlib.ticker import FixedLocator, NullLocator

    ticks = ticks_of(*axes.get_xlim())
    axes.xaxis.set_major_locator(FixedLocator(ticks))
    axes.xaxis.set_minor_locator(NullLocator())
    axes.set_xticklabels([number(tick) for tick in ticks])


def _gain(size: "Axes", turn: "Axes", mark: Mark | None) -> None:
    """The room from 0 dB at the frequency at which the angle has turned by 180 deg."""
    if mark is None:
        return
    above = size.get_lines()[0]
    level = float(np.interp(mark.frequency, np.asarray(above.get_xdata()), np.asarray(above.get_ydata())))
    _thread(size, turn, mark.frequency)
    turn.plot([mark.frequency], [0.0], marker="o", markersize=4, color=colour("limit"), zorder=6)
    _room(size, mark.frequency, 0.0, level, f"gain margin {number(mark.value, 3)} dB", right=_place(size, mark) < 0.88)


def _phase(size: "Axes", turn: "Axes", mark: Mark | None) -> None:
    """The room above -180 deg at the frequency at which the loop has size one."""
    if mark is None:
        return
    line = turn.get_lines()[0]
    level = float(np.interp(mark.frequency, np.asarray(line.get_xdata()), np.asarray(line.get_ydata())))
    _thread(size, turn, mark.frequency)
    size.plot([mark.frequency], [0.0], marker="o", markersize=4, color=colour("limit"), zorder=6)
    _room(turn, mark.frequency, 0.0, level, f"phase margin {number(mark.value, 3)} deg", right=_place(turn, mark) < 0.3)


def _thread(size: "Axes", turn: "Axes", frequency: float) -> None:
    for axes in (size, turn):
        axes.axvline(frequency, color=colour("faint"), linewidth=0.8, zorder=1)


def _place(axes: "Axes", mark: Mark) -> float:
    """Where on the axis a mark stands, 0 to 1."""
    low, high = np.log(axes.get_xlim())
    return float((np.log(mark.frequency) - low) / (high - low))


def _room(axes: "Axes", frequency: float, edge: float, level: float, text: str, *, right: bool) -> None:
    style: dict[str, Any] = {"color": colour("limit"), "linewidth": 1.6, "zorder": 5, "solid_capstyle": "butt"}
    axes.plot([frequency, frequency], [edge, level], **style)
    _say(axes, text, (frequency, 0.5 * (edge + level)), right=right, centre=True)


def _peak(axes: "Axes", mark: Mark) -> None:
    axes.plot([mark.frequency], [mark.value], marker="o", markersize=4, color=colour("limit"), zorder=6)
    said = f"peak sensitivity {number(mark.value, 3)}"
    _say(axes, said, (mark.frequency, mark.value), right=_place(axes, mark) < 0.85, centre=False)


def _say(axes: "Axes", text: str, place: tuple[float, float], *, right: bool, centre: bool) -> None:
    axes.annotate(
        text, place, xytext=(6 if right else -6, 0 if centre else 2), textcoords="offset points",
        ha="left" if right else "right", va="center" if centre else "bottom", fontsize=SMALL, color=colour("limit"),
        fontweight="bold", zorder=7, annotation_clip=False,
    )  # fmt: skip
