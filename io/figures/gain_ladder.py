"""The gain ladder as a ladder: one rung above the other, each with the response to expect beside it."""

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from ...design.ladder.rung import Band, Ladder, Rung
from .look import BAND_ALPHA, SMALL, TEXT, colour, limits_around, sheet, strip, time_scale
from .words import number, plain, with_unit

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

ROW, FOOT = 0.72, 0.3
RAIL_LEFT, RAIL_WIDE = 0.25, 1.25
CURVE_LEFT, CURVE_WIDE = 1.85, 2.55
TEXT_LEFT = 4.55


def gain_ladder(ladder: Ladder, *, response_unit: str, command_unit: str) -> "Figure":
    """Draw rails and rungs, the foot (loop open) lowest, and beside each rung its predicted response with its band.

    Parameters
    ----------
    ladder : Ladder
        With at least one rung.
    response_unit, command_unit : str

    Returns
    -------
    Figure
    """
    foot = [] if ladder.first_move is None else [ladder.first_move]
    count = len(ladder.rungs) + len(foot)
    figure = sheet(ROW * count + FOOT + 0.1)
    rails = strip(figure, (RAIL_LEFT, FOOT, RAIL_WIDE, ROW * count), frame=False)
    rails.set_xlim(0.0, 1.0)
    rails.set_ylim(0.0, float(count))
    for x in (0.12, 0.88):
        rails.plot([x, x], [0.0, count], color=colour("ink"), linewidth=2.2, solid_capstyle="round", clip_on=False)
    place = 0
    if ladder.first_move is not None:
        move = ladder.first_move
        _tread(rails, place, "rung 0", "loop open", open_loop=True)
        size = with_unit(move.command_to - move.command_from, command_unit, 3)
        moved = with_unit(move.moves.predicted, response_unit, 3)
        lines = [f"command moved by {size}:", f"response by {moved} in {with_unit(move.within, 's', 3)},", "or stop"]
        _beside(figure, place, move.band, None, lines)
        place += 1
    for rung in ladder.rungs:
        name = "target" if rung is ladder.rungs[-1] else f"{number(100.0 * rung.share, 2)} % of target"
        _tread(rails, place, f"rung {rung.number}", name, open_loop=False)
        if rung.expected is not None:
            _beside(figure, place, rung.expected.band, rung.expected.setpoint_to, _lines(rung, response_unit))
        place += 1
    return figure


def _tread(axes: "Axes", place: int, name: str, what: str, *, open_loop: bool) -> None:
    """One rung between the rails; that of the open loop is drawn as a broken one."""
    y = place + 0.5
    style = (0, (4, 3)) if open_loop else "-"
    axes.plot([0.12, 0.88], [y, y], color=colour("ink"), linewidth=2.2, linestyle=style)
    axes.text(0.5, y + 0.07, plain(name), ha="center", va="bottom", fontsize=TEXT, color=colour("ink"))
    axes.text(0.5, y - 0.09, plain(what), ha="center", va="top", fontsize=SMALL, color=colour("ink"))


def _beside(figure: "Figure", place: int, band: Band, setpoint: float | None, lines: Sequence[str]) -> None:
    axes = strip(figure, (CURVE_LEFT, FOOT + ROW * place + 0.13, CURVE_WIDE, ROW - 0.2))
    factor, unit = time_scale(float(band.time[-1]))
    time = band.time * factor
    axes.fill_between(time, band.low, band.high, color=colour("model"), alpha=BAND_ALPHA, linewidth=0.0)
    axes.plot(time, band.response, color=colour("model"), linewidth=1.2)
    if setpoint is not None:
        axes.plot([0.0, time[-1]], [setpoint, setpoint], color=colour("setpoint"), linewidth=0.9, linestyle=(0, (6, 3)))
    axes.set_xlim(0.0, float(time[-1]))
    axes.set_ylim(*limits_around(band.low, band.high, np.array([band.response[0] if setpoint is None else setpoint])))
    axes.set_xticks([0.0, float(time[-1])], ["0", plain(f"{number(float(time[-1]), 2)} {unit}")])
    axes.set_yticks([])
    axes.tick_params(axis="x", length=2, pad=1)
    width, height = figure.get_size_inches()
    figure.text(
        TEXT_LEFT / width, (FOOT + ROW * (place + 0.5)) / height, "\n".join(plain(line) for line in lines),
        ha="left", va="center", fontsize=SMALL, color=colour("ink"), linespacing=1.25,
    )  # fmt: skip


def _lines(rung: Rung, response_unit: str) -> list[str]:
    expected = rung.expected
    if expected is None:
        return []
    step = with_unit(expected.setpoint_to - expected.setpoint_from, response_unit, 3)
    settles = expected.settling_time.predicted
    calm = "does not settle" if settles is None else f"at rest after {with_unit(settles, 's', 2)}"
    over = 100.0 * (expected.overshoot.predicted or 0.0)
    return [
        f"step of {step}, overshoot {number(over, 2) if over >= 0.05 else '0'} %,",
        f"{calm},",
        f"gain margin at least {with_unit(rung.gain_margin, 'dB', 3)}",
    ]
