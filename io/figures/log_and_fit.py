"""One fitted record: what was commanded, what was measured beside the model, and what the model leaves over."""

from typing import TYPE_CHECKING

import numpy as np

from ...ident.fitted import FittedRun
from . import traces
from .look import EndLabel, colour, hide_time, label_ends, limits_around, name_axes, sheet, strip, time_scale
from .thin import FloatArray

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

LEFT, WIDE = 0.72, 5.45


def log_and_fit(run: FittedRun, *, command_unit: str, response_unit: str) -> "Figure":
    """Draw command, response with model, and residual of one record over the same time.

    Parameters
    ----------
    run : FittedRun
    command_unit, response_unit : str

    Returns
    -------
    Figure
    """
    figure = sheet(4.0)
    factor, unit = time_scale(float(run.time[-1] - run.time[0]))
    time = run.time * factor
    _command(strip(figure, (LEFT, 3.15, WIDE, 0.75)), time, run, command_unit)
    _response(strip(figure, (LEFT, 1.35, WIDE, 1.65)), time, run, response_unit)
    left_over = strip(figure, (LEFT, 0.45, WIDE, 0.75))
    _residual(left_over, time, run, response_unit)
    name_axes(left_over, x=f"time from the first sample ({unit})")
    for axes in figure.axes:
        axes.set_xlim(time[0], time[-1])
    return figure


def _command(axes: "Axes", time: FloatArray, run: FittedRun, unit: str) -> None:
    traces.line(axes, time, run.command, "command")
    axes.set_ylim(limits_around(run.command, margin=0.1))
    name_axes(axes, y=f"command\n({unit})")
    hide_time(axes)
    label_ends(axes, [EndLabel(float(run.command[-1]), "command", "command")])


def _response(axes: "Axes", time: FloatArray, run: FittedRun, unit: str) -> None:
    traces.readings(axes, time, run.response)
    traces.line(axes, time, run.model, "model", width=1.0)
    axes.set_ylim(limits_around(run.response, run.model))
    name_axes(axes, y=f"response ({unit})")
    hide_time(axes)
    measured = run.response[np.isfinite(run.response)]
    last = float(measured[-1]) if measured.size else float("nan")
    label_ends(axes, [EndLabel(last, "measured", "response"), EndLabel(float(run.model[-1]), "model", "model")])


def _residual(axes: "Axes", time: FloatArray, run: FittedRun, unit: str) -> None:
    residual = run.response - run.model
    axes.axhline(0.0, color=colour("model"), linewidth=0.8)
    traces.readings(axes, time, residual)
    axes.set_ylim(limits_around(residual, 0.0, margin=0.1))
    name_axes(axes, y=f"residual\n({unit})")
    label_ends(axes, [EndLabel(0.0, "measured\nless model", "response")])
