"""Lines and bands over time, drawn the same way in every picture."""

from typing import TYPE_CHECKING

from .look import BAND_ALPHA, DASHES, Role, colour
from .thin import FloatArray, thin_band, thin_line

if TYPE_CHECKING:
    from matplotlib.axes import Axes


def line(axes: "Axes", time: FloatArray, values: FloatArray, role: Role, *, width: float = 1.1) -> None:
    """One quantity over time in its own colour and dashes."""
    shown_time, shown = thin_line(time, values)
    axes.plot(shown_time, shown, color=colour(role), linestyle=DASHES.get(role, "-"), linewidth=width)


def readings(axes: "Axes", time: FloatArray, values: FloatArray) -> None:
    """Measured samples: dots where there are few, a fine line where there are many."""
    shown_time, shown = thin_line(time, values)
    if len(time) <= 220:
        axes.plot(shown_time, shown, linestyle="none", marker="o", markersize=2.0, color=colour("response"))
    else:
        axes.plot(shown_time, shown, color=colour("response"), linewidth=0.9)


def band(axes: "Axes", time: FloatArray, low: FloatArray, high: FloatArray, role: Role) -> None:
    """A filled 95 % band with fine edges, so that it is seen without colour too."""
    shown_time, shown_low, shown_high = thin_band(time, low, high)
    axes.fill_between(shown_time, shown_low, shown_high, color=colour(role), alpha=BAND_ALPHA, linewidth=0)
    for edge in (shown_low, shown_high):
        axes.plot(shown_time, edge, color=colour(role), linewidth=0.4, alpha=0.8)


def limit_line(axes: "Axes", value: float, text: str) -> None:
    """A hardware limit or a required bound across the whole strip, its text on the line."""
    axes.axhline(value, color=colour("limit"), linestyle=DASHES["limit"], linewidth=0.9)
    axes.annotate(
        text, (0.0, value), xycoords=("axes fraction", "data"), xytext=(4, 2), textcoords="offset points",
        fontsize=6.8, color=colour("limit"), va="bottom", ha="left",
    )  # fmt: skip
