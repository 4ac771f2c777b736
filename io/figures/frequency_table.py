"""A frequency table over the fitted plant: size and phase, each point with its error."""

from typing import TYPE_CHECKING, Any

import numpy as np

from ...ident.plant import Plant
from ...ident.run import FloatArray
from ...ident.tables import FittedTable
from .gain_ribbon import ticks_of
from .look import EndLabel, colour, hide_time, label_ends, limits_around, name_axes, sheet, strip
from .words import number

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

LEFT, WIDE = 0.86, 5.4
_WIDE_95 = 1.959964
_POINTS = 600


def frequency_table(table: FittedTable, plant: Plant, *, gain_unit: str) -> "Figure":
    """Draw a table's magnitudes, and phases where it has any, with 95 % errors over the plant's response.

    Parameters
    ----------
    table : FittedTable
    plant : Plant
        Drawn between the points too.
    gain_unit : str
        Response unit per command unit.

    Returns
    -------
    Figure
    """
    phased = table.phase is not None
    figure = sheet(3.9 if phased else 2.6)
    size = strip(figure, (LEFT, 2.1 if phased else 0.5, WIDE, 1.65 if phased else 1.9))
    between = np.geomspace(table.frequency[0], table.frequency[-1], _POINTS)
    drawn = np.unique(np.concatenate([between, table.frequency]))
    shown = np.abs(plant.response_at(drawn))
    _frequencies(size, table.frequency)
    size.set_yscale("log")
    _points(size, table.frequency, table.magnitude, np.minimum(_WIDE_95 * table.magnitude_error, 0.9 * table.magnitude))
    size.plot(drawn, shown, color=colour("model"), linewidth=1.2)
    low, high = limits_around(np.log10(table.magnitude), np.log10(shown), margin=0.08)
    size.set_ylim(10.0**low, 10.0**high)
    _plain_sizes(size)
    name_axes(size, y=f"size ({gain_unit}),\nlogarithmic")
    last = [(float(np.log10(v)) - low) / (high - low) for v in (table.magnitude[-1], shown[-1])]
    _name_ends(size, last)
    bottom = size
    if table.phase is not None:
        bottom = _phases(figure, table, table.phase, drawn, np.unwrap(np.angle(plant.response_at(drawn))))
        hide_time(size)
    name_axes(bottom, x="angular frequency (rad/s), logarithmic")
    return figure


def _phases(
    figure: "Figure", table: FittedTable, phase: FloatArray, drawn: FloatArray, model: FloatArray
) -> "Axes":
    """The strip of phases; both curves unwrapped, the model on the turn of the points."""
    axes = strip(figure, (LEFT, 0.5, WIDE, 1.45))
    _frequencies(axes, table.frequency)
    measured = np.unwrap(phase)
    off = np.mean(measured - np.interp(table.frequency, drawn, model))
    model = model + 2 * np.pi * np.round(off / (2 * np.pi))
    measured, model, error = (np.degrees(values) for values in (measured, model, _WIDE_95 * table.phase_error))
    _points(axes, table.frequency, measured, error)
    axes.plot(drawn, model, color=colour("model"), linewidth=1.2)
    axes.set_ylim(limits_around(measured, model, margin=0.08))
    name_axes(axes, y="phase (deg)")
    label_ends(
        axes, [EndLabel(float(measured[-1]), "measured", "response"), EndLabel(float(model[-1]), "model", "model")]
    )
    return axes


def _frequencies(axes: "Axes", frequency: FloatArray) -> None:
    from matplotlib.ticker import FixedLocator, NullLocator

    axes.set_xscale("log")
    axes.set_xlim(frequency[0] / 1.05, frequency[-1] * 1.05)
    ticks = ticks_of(*axes.get_xlim())
    axes.xaxis.set_major_locator(FixedLocator(ticks))
    axes.xaxis.set_minor_locator(NullLocator())
    axes.set_xticklabels([number(tick) for tick in ticks])


def _plain_sizes(axes: "Axes") -> None:
    from matplotlib.ticker import FixedLocator, NullLocator

    ticks = ticks_of(*axes.get_ylim())
    axes.yaxis.set_major_locator(FixedLocator(ticks))
    axes.yaxis.set_minor_locator(NullLocator())
    axes.set_yticklabels([number(tick) for tick in ticks])


def _points(axes: "Axes", frequency: FloatArray, values: FloatArray, errors: FloatArray) -> None:
    style: dict[str, Any] = {"color": colour("response"), "linestyle": "none", "elinewidth": 0.7}
    axes.errorbar(frequency, values, yerr=errors, marker="o", markersize=2.4, capsize=0, **style)


def _name_ends(axes: "Axes", places: list[float]) -> None:
    """Names beside the ends of the size's curves, where `label_ends` can't count on a straight axis."""
    measured, model = places
    apart = 0.09
    if abs(measured - model) < apart:
        middle, above = 0.5 * (measured + model), measured >= model
        measured, model = (middle + (0.5 if above else -0.5) * apart, middle + (-0.5 if above else 0.5) * apart)
    for place, text, role in ((measured, "measured", "response"), (model, "model", "model")):
        axes.text(
            1.012, place, text, transform=axes.transAxes, va="center", ha="left", fontsize=7.5, color=colour(role)  # type: ignore[arg-type]
        )
