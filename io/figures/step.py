"""The predicted response to the test step with its band, what is asked of it, and the command that makes it."""

from collections.abc import Sequence
from dataclasses import fields
from typing import TYPE_CHECKING, Any

import numpy as np

from ...design.designed import Judged, Trajectory
from ...design.requirements import Limits
from . import traces
from .look import (
    DASHES,
    SMALL,
    EndLabel,
    colour,
    hide_time,
    label_ends,
    limits_around,
    name_axes,
    sheet,
    strip,
    time_scale,
)
from .thin import FloatArray, thin_line
from .words import number, with_unit

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

LEFT, WIDE = 0.72, 5.45


def predicted_step(
    trajectory: Trajectory, *, command_unit: str, response_unit: str, limits: Limits, judged: Sequence[Judged] = ()
) -> "Figure":
    """Draw the setpoint step, the predicted response and command with their 95 % bands, bounds and limits.

    Parameters
    ----------
    trajectory : Trajectory
    command_unit, response_unit : str
    limits : Limits
        Drawn where they come near what is predicted.
    judged : sequence of Judged
        Overshoot and settling time are marked as bounds where they are asked for.

    Returns
    -------
    Figure
    """
    trajectory = told(trajectory, judged)
    figure = sheet(3.9)
    factor, unit = time_scale(float(trajectory.time[-1] - trajectory.time[0]))
    time = trajectory.time * factor
    before = -0.04 * float(time[-1])
    above = strip(figure, (LEFT, 1.75, WIDE, 2.05))
    _response(above, time, trajectory, limits)
    _bounds(above, time, factor, trajectory, judged)
    name_axes(above, y=f"response ({response_unit})")
    hide_time(above)
    below = strip(figure, (LEFT, 0.45, WIDE, 1.15))
    _command(below, time, trajectory, limits)
    name_axes(below, x=f"time since the controller saw the new setpoint ({unit})", y=f"command\n({command_unit})")
    for axes in figure.axes:
        axes.set_xlim(before, time[-1])
    _before(above, before, trajectory)
    return figure


def told(trajectory: Trajectory, judged: Sequence[Judged]) -> Trajectory:
    """The stretch in which something happens: until well after the band has come to rest and should have settled."""
    time, final, start = trajectory.time, float(trajectory.setpoint[-1]), float(trajectory.response[0])
    away = np.maximum(np.abs(trajectory.response_high - final), np.abs(trajectory.response_low - final))
    rest = float(away[-1]) + 0.02 * abs(final - start)
    moving = np.flatnonzero(away > rest)
    asked = [each.requirement.limit for each in judged if each.requirement.name == "settling_time"]
    until = 1.25 * max([float(time[moving[-1]]) if moving.size else 0.0, *asked])
    count = max(2, int(np.searchsorted(time, 1.4 * until))) if until > 0.0 else len(time)
    return Trajectory(*(getattr(trajectory, field.name)[:count] for field in fields(trajectory)))


def _before(axes: "Axes", since: float, trajectory: Trajectory) -> None:
    """The setpoint before the step, so that the step is seen."""
    start, first = float(trajectory.response[0]), float(trajectory.setpoint[0])
    style: dict[str, Any] = {"color": colour("setpoint"), "linestyle": DASHES["setpoint"], "linewidth": 1.0}
    axes.plot([since, 0.0, 0.0], [start, start, first], **style)


def _response(axes: "Axes", time: FloatArray, trajectory: Trajectory, limits: Limits) -> None:
    traces.band(axes, time, trajectory.response_low, trajectory.response_high, "model")
    axes.step(
        *thin_line(time, trajectory.setpoint), where="post", color=colour("setpoint"), linestyle=DASHES["setpoint"],
        linewidth=1.0,
    )  # fmt: skip
    traces.line(axes, time, trajectory.response, "model", width=1.4)
    seen = (trajectory.response_low, trajectory.response_high, trajectory.setpoint)
    near = _near(limits.response_lowest, limits.response_highest, *seen)
    axes.set_ylim(limits_around(*seen, near))
    for value in near:
        traces.limit_line(axes, float(value), "limit of the response")
    ends = [EndLabel(float(trajectory.setpoint[-1]), "setpoint", "setpoint")]
    ends += [EndLabel(float(trajectory.response[-1]), "response", "model")]
    label_ends(axes, [*ends, EndLabel(float(trajectory.response_high[-1]), "95 % band", "model")])


def _command(axes: "Axes", time: FloatArray, trajectory: Trajectory, limits: Limits) -> None:
    traces.band(axes, time, trajectory.command_low, trajectory.command_high, "command")
    shown_time, shown = thin_line(time, trajectory.command)
    axes.step(shown_time, shown, where="post", color=colour("command"), linewidth=1.1)
    seen = (trajectory.command_low, trajectory.command_high)
    near = _near(limits.command_lowest, limits.command_highest, *seen)
    axes.set_ylim(limits_around(*seen, near, margin=0.1))
    for value in near:
        traces.limit_line(axes, float(value), "limit of the command")
    label_ends(axes, [EndLabel(float(trajectory.command[-1]), "command,\n95 % band", "command")])


def _near(lowest: float | None, highest: float | None, *seen: FloatArray) -> FloatArray:
    """Those of two limits that lie within 60 % of the shown range beyond it."""
    low, high = limits_around(*seen, margin=0.6)
    given = [value for value in (lowest, highest) if value is not None and low <= value <= high]
    return np.asarray(given, dtype=float)


def _bounds(axes: "Axes", time: FloatArray, factor: float, trajectory: Trajectory, judged: Sequence[Judged]) -> None:
    """Mark the bounds of overshoot and settling, taken about the setpoint where the response should come to rest."""
    start, final = float(trajectory.response[0]), float(trajectory.setpoint[-1])
    for item in judged:
        asked = item.requirement
        if asked.name == "overshoot":
            bound = final + asked.limit * (final - start)
            _short_bound(axes, bound, f"overshoot at most {number(100 * asked.limit)} %", final > start)
        if asked.name == "settling_time" and asked.limit * factor < time[-1]:
            by = f"settled by {with_unit(asked.limit * asked.scale, asked.unit)}"
            _settling(axes, asked.limit * factor, by, time[-1], final, (asked.band or 0.02) * (final - start))


def _short_bound(axes: "Axes", bound: float, text: str, upward: bool) -> None:
    axes.axhline(bound, xmin=0.02, color=colour("limit"), linestyle=DASHES["limit"], linewidth=0.8)
    low, high = axes.get_ylim()
    axes.set_ylim(min(low, bound - 0.12 * (high - low)), max(high, bound + 0.12 * (high - low)))
    axes.annotate(
        text, (0.99, bound), xycoords=("axes fraction", "data"), xytext=(0, 2 if upward else -2),
        textcoords="offset points", ha="right", va="bottom" if upward else "top", fontsize=6.8, color=colour("limit"),
    )  # fmt: skip


def _settling(axes: "Axes", by: float, text: str, end: float, final: float, band: float) -> None:
    style: dict[str, Any] = {"color": colour("limit"), "linewidth": 0.8}
    axes.plot([end, by, by, end], [final - band, final - band, final + band, final + band], **style)
    axes.annotate(
        text, (by, final - band), xytext=(3, -5 if band > 0 else 5),
        textcoords="offset points", va="top" if band > 0 else "bottom", ha="left", fontsize=SMALL - 0.7,
        color=colour("limit"),
    )  # fmt: skip
