"""The report's pictures, made from an outcome and ready to stand in a page."""

import math
from collections.abc import Iterator

from ...design.designed import Design
from ...design.locus.condition import Working
from ...design.locus.loop import OpenLoop
from ..figures.headroom_bars import Headroom, headroom_bars
from ..figures.look import Role
from ..figures.svg import inline_svg
from ..outcome import Outcome
from ..rigfile.rig import Rig
from .words import spaced

MOST_LOGS = 4


def step_picture(outcome: Outcome, design: Design) -> str:
    """The predicted test step, or nothing where no test step was asked for."""
    from ..figures.step import predicted_step

    if design.trajectory is None:
        return ""
    rig = outcome.rig
    figure = predicted_step(
        design.trajectory, command_unit=rig.command_unit, response_unit=rig.response_unit, limits=rig.limits,
        judged=design.judged,
    )  # fmt: skip
    return inline_svg(figure, "step", "Predicted response and command for the test step, with 95 % bands")


def ribbon_picture(design: Design) -> str:
    """The gain ribbon."""
    from ..figures.gain_ribbon import gain_ribbon

    held = ", ".join(spaced(name) for name, _ in design.selection.rows) or "no requirement"
    title = f"Gain ribbon over the loop gain for {held}; chosen K {design.selection.loop_gain:.4g}"
    return inline_svg(gain_ribbon(design.selection), "ribbon", title)


def headroom_picture(outcome: Outcome) -> str:
    """The headroom bars."""
    rows = headrooms(outcome)
    said = [f"{row.name} {100 * row.used:.0f} % used" for row in rows if row.used is not None]
    return inline_svg(headroom_bars(rows), "headroom", "Headroom bars: " + ", ".join(said))


def headrooms(outcome: Outcome) -> tuple[Headroom, ...]:
    """The way to each of the six limits, given or not."""
    return tuple(_headrooms(outcome.rig, outcome.design, *_operating_point(outcome)))


def _headrooms(rig: Rig, design: Design | None, command: float, response: float) -> Iterator[Headroom]:
    limits, judged = rig.limits, {each.name: each for each in design.limits} if design else {}
    sides: tuple[tuple[str, Role, str, float, float | None], ...] = (
        ("command lowest", "command", rig.command_unit, command, limits.command_lowest),
        ("command highest", "command", rig.command_unit, command, limits.command_highest),
        ("command rate", "command", f"{rig.command_unit}/s", 0.0, limits.command_rate),
        ("response lowest", "model", rig.response_unit, response, limits.response_lowest),
        ("response highest", "model", rig.response_unit, response, limits.response_highest),
        ("response rate", "model", f"{rig.response_unit}/s", 0.0, limits.response_rate),
    )
    for name, role, unit, start, limit in sides:
        found = judged.get(name)
        yield Headroom(name, role, unit, start, found.predicted_worst if found else None, limit)


def _operating_point(outcome: Outcome) -> tuple[float, float]:
    fit, rig = outcome.fit, outcome.rig
    if fit is not None:
        return fit.operating_command, fit.operating_response
    return rig.operating_command or 0.0, rig.operating_response or 0.0


def log_pictures(outcome: Outcome) -> tuple[tuple[str, str], ...]:
    """Label and picture of the first fitted records."""
    from ..figures.log_and_fit import log_and_fit

    rig, runs = outcome.rig, outcome.fit.runs if outcome.fit else ()
    made = []
    for place, run in enumerate(runs[:MOST_LOGS]):
        figure = log_and_fit(run, command_unit=rig.command_unit, response_unit=rig.response_unit)
        title = f"Command, response with model, and residual of {run.label}"
        made.append((run.label, inline_svg(figure, f"log-{place}", title)))
    return tuple(made)


def held_out_pictures(outcome: Outcome) -> tuple[str, ...]:
    """A picture for each held-out record, empty where it has no prediction."""
    from ..figures.held_out import held_out

    rig, made = outcome.rig, []
    for place, compared in enumerate(outcome.closing):
        if len(compared.time) < 2 or not math.isfinite(float(compared.predicted[-1])):
            made.append("")
            continue
        figure = held_out(compared, command_unit=rig.command_unit, response_unit=rig.response_unit)
        made.append(inline_svg(figure, f"held-out-{place}", f"Held-out record {compared.label} over its prediction"))
    return tuple(made)


def locus_picture(design: Design, loop: OpenLoop, found: Working) -> str:
    """The locus with the chosen point."""
    from ..figures.locus import locus, view_of
    from ..figures.locus_lines import at_gain, locus_lines

    lines = locus_lines(loop, view_of(found))
    others = at_gain(loop, lines, found.loop_gain)
    figure = locus(lines, found, sampled_pole=design.selection.sampled_pole, others=[complex(s) for s in others])
    return inline_svg(figure, "locus", "Locus with the chosen point and the vectors of the magnitude condition")
