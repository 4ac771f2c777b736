"""The report's ladder: picture, table of gains, and when to abort."""

from typing import Any

from ...design.gains import Gains
from ...design.ladder.rung import RESPONSE_TIMES, SWINGS, Ladder, Rung
from ..figures.svg import inline_svg
from ..figures.words import number, with_unit
from ..forms_as_printed import forms_as_printed
from ..ladder_rows import SAFE_STATE
from ..outcome import Outcome
from ..rigfile.rig import Rig
from .tables import Table

GUIDE = (
    "How to read it: climb from the foot. Each rung is a controller of its own; beside it the response to expect from "
    "its setpoint step (the foot: from one move of the command with the loop open): the full line on the fitted plant, "
    "the band for 99.9 % of what may be measured on the plausible plants, noise included."
)


def ladder_of(outcome: Outcome) -> dict[str, Any]:
    """What the page shows of the ladder."""
    ladder = outcome.ladder
    if ladder is None:
        return {"refusal": "No ladder was made for these gains.", "picture": ""}
    if ladder.refusal:
        return {"refusal": ladder.refusal, "picture": ""}
    return {
        "refusal": "",
        "picture": _picture(ladder, outcome.rig),
        "guide": GUIDE,
        "opening": opening(ladder, outcome.rig),
        "table": table(ladder, outcome.rig),
        "aborts": aborts(ladder, outcome.rig),
        "started_from": ladder.started_from,
    }


def _picture(ladder: Ladder, rig: Rig) -> str:
    from ..figures.gain_ladder import gain_ladder

    figure = gain_ladder(ladder, response_unit=rig.response_unit, command_unit=rig.command_unit)
    return inline_svg(figure, "ladder", f"Gain ladder of {len(ladder.rungs)} rungs above an open-loop move")


def opening(ladder: Ladder, rig: Rig) -> str:
    """Rung 0 as an instruction."""
    move = ladder.first_move
    if move is None:
        return "Rung 0: with the loop open, move the command by hand and see that the response moves the right way."
    way = "up" if move.up else "down"
    start, end = (with_unit(level, rig.command_unit) for level in (move.command_from, move.command_to))
    size = with_unit(abs(move.moves.predicted or 0.0), rig.response_unit, 3)
    return (
        f"Rung 0, loop open: from the operating point take the command from {start} to {end}. The response must move "
        f"{way} by {size} within {with_unit(move.within, 's', 3)} (at least "
        f"{with_unit(move.at_least, rig.response_unit, 3)}). Otherwise stop: wiring, sign or unit is wrong. Then move "
        "the command back."
    )


def table(ladder: Ladder, rig: Rig) -> Table:
    """One row a closed-loop rung: gains, step and lowest margins."""
    rows = tuple(_row(rung, rig) for rung in ladder.rungs)
    count = min((rung.plants_checked for rung in ladder.rungs), default=0)
    caption = (
        f"Each rung with its own gains (parallel form) and the lowest margins over {count} plausible plants; the other "
        "forms stand in gains.json"
    )
    head = ("rung", "gains", "setpoint step to", "peak", "at rest after", "lowest margins")
    return Table(caption, head, rows)


def _row(rung: Rung, rig: Rig) -> tuple[str, ...]:
    expected, unit = rung.expected, rig.response_unit
    margins = f"{number(rung.gain_margin, 3)} dB, {number(rung.phase_margin, 3)} deg"
    if expected is None:
        return (str(rung.number), _gains(rung.gains, rig), "none was stated", "", "", margins)
    return (
        str(rung.number),
        _gains(rung.gains, rig),
        with_unit(expected.setpoint_to, unit),
        with_unit(expected.peak.predicted, unit),
        with_unit(expected.settling_time.predicted, "s", 3),
        margins,
    )


def _gains(gains: Gains, rig: Rig) -> str:
    forms = forms_as_printed(gains, rig.command_unit, rig.response_unit)
    form = forms["parallel"] or forms["zero-pole"] or {}
    names = {"proportional": "P", "integral": "I", "derivative": "D", "derivative_filter_time": "Tf"}
    parts = [
        f"{names.get(name, name)} {with_unit(each['value'], each['unit'], 6)}"
        for name, each in form.items()
        if each is not None and each["value"]
    ]
    return ", ".join(parts)


def aborts(ladder: Ladder, rig: Rig) -> tuple[str, ...]:
    """When to stop, on any rung."""
    visible = with_unit(6.0 * ladder.noise_std, rig.response_unit, 2)
    return (
        "a limit of command or response is reached;",
        f"the response stays outside the rung's band for {number(RESPONSE_TIMES)} response times "
        "(rise times of that rung, in gains.json);",
        f"an oscillation grows: {SWINGS} swings about the setpoint, each larger than the last and than {visible};",
        f"the response is frozen: it moves by less than {visible} over as long while the command moves.",
        f"Then {SAFE_STATE}.",
    )
