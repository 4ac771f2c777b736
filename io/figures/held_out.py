"""A held-out record over its prediction, which never saw it."""

from typing import TYPE_CHECKING

import numpy as np

from ...design.closing.compared import Compared
from . import traces
from .look import EndLabel, hide_time, label_ends, limits_around, name_axes, sheet, strip, time_scale

if TYPE_CHECKING:
    from matplotlib.figure import Figure

LEFT, WIDE = 0.72, 5.45


def held_out(compared: Compared, *, command_unit: str, response_unit: str) -> "Figure":
    """Draw the record's command, its response, and the prediction with the 95 % band.

    Parameters
    ----------
    compared : Compared
    command_unit, response_unit : str

    Returns
    -------
    Figure
    """
    figure = sheet(3.4)
    factor, unit = time_scale(float(compared.time[-1] - compared.time[0]))
    time = compared.time * factor
    drive = strip(figure, (LEFT, 2.55, WIDE, 0.75))
    traces.line(drive, time, compared.command, "command")
    drive.set_ylim(limits_around(compared.command, margin=0.1))
    name_axes(drive, y=f"command\n({command_unit})")
    hide_time(drive)
    label_ends(drive, [EndLabel(float(compared.command[-1]), "command", "command")])
    axes = strip(figure, (LEFT, 0.45, WIDE, 1.95))
    traces.band(axes, time, compared.low, compared.high, "model")
    traces.readings(axes, time, compared.response)
    traces.line(axes, time, compared.predicted, "model", width=1.2)
    axes.set_ylim(limits_around(compared.response, compared.low, compared.high))
    name_axes(axes, x=f"time from the first sample ({unit})", y=f"response ({response_unit})")
    measured = compared.response[np.isfinite(compared.response)]
    last = float(measured[-1]) if measured.size else float("nan")
    ends = [EndLabel(last, "measured", "response"), EndLabel(float(compared.predicted[-1]), "predicted", "model")]
    label_ends(axes, [*ends, EndLabel(float(compared.high[-1]), "95 % band", "model")])
    for each in figure.axes:
        each.set_xlim(time[0], time[-1])
    return figure
