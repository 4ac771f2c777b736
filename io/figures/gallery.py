"""Every picture of a finished job as a Figure, for the report, for files, and for an engineer's own notebook."""

import math
from collections.abc import Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING

from ...design.compensator import loop_gain, open_loop
from ...design.designed import Design
from ...design.locus.condition import working
from ...ident.fitted import Fit
from ...ident.tables import FittedTable
from ..outcome import Outcome
from ..rigfile.rig import Rig
from .headroom_bars import Headroom, headroom_bars
from .look import Role

if TYPE_CHECKING:
    from matplotlib.figure import Figure


@dataclass(frozen=True, eq=False)
class Picture:
    """A figure with its name and title.

    Attributes
    ----------
    name : str
        Letters, digits and hyphens: a file name without its ending.
    title : str
        What a screen reader says; may hold anything.
    figure : Figure
    """

    name: str
    title: str
    figure: "Figure"


def gallery(outcome: Outcome) -> Iterator[Picture]:
    """All pictures of a job, in the order of the report.

    Parameters
    ----------
    outcome : Outcome

    Yields
    ------
    Picture
    """
    design, fit = outcome.design, outcome.fit
    if design is not None:
        step = step_picture(outcome, design)
        yield from [step] if step else []
        yield ribbon_picture(design)
    yield headroom_picture(outcome)
    loci = two_loci_picture(outcome)
    yield from [loci] if loci else []
    ladder = ladder_picture(outcome)
    yield from [ladder] if ladder else []
    if fit is not None:
        yield from (log_picture(outcome, fit, place) for place in range(len(fit.runs)))
        yield from (table_picture(outcome, fit, table, f"table-{place}") for place, table in enumerate(fit.tables))
    if fit is not None and design is not None:
        yield locus_picture(outcome, fit, design)
        margins = margins_picture(outcome, fit, design)
        yield from [margins] if margins else []
    for place in range(len(outcome.closing)):
        held_out = held_out_picture(outcome, place)
        yield from [held_out] if held_out else []


def step_picture(outcome: Outcome, design: Design) -> Picture | None:
    """The predicted test step; None where no test step was asked for."""
    from .step import predicted_step

    if design.trajectory is None:
        return None
    rig = outcome.rig
    figure = predicted_step(
        design.trajectory, command_unit=rig.command_unit, response_unit=rig.response_unit, limits=rig.limits,
        judged=design.judged,
    )  # fmt: skip
    return Picture("step", "Predicted response and command for the test step, with 95 % bands", figure)


def ribbon_picture(design: Design) -> Picture:
    """The gain ribbon."""
    from .gain_ribbon import gain_ribbon

    held = ", ".join(name.replace("_", " ") for name, _ in design.selection.rows) or "no requirement"
    title = f"Gain ribbon over the loop gain for {held}; chosen K {design.selection.loop_gain:.4g}"
    return Picture("ribbon", title, gain_ribbon(design.selection))


def headroom_picture(outcome: Outcome) -> Picture:
    """The headroom bars."""
    rows = headrooms(outcome)
    said = [f"{row.name} {100 * row.used:.0f} % used" for row in rows if row.used is not None]
    return Picture("headroom", "Headroom bars: " + ", ".join(said), headroom_bars(rows))


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


def ladder_picture(outcome: Outcome) -> Picture | None:
    """The gain ladder; None where none was made."""
    from .gain_ladder import gain_ladder

    ladder, rig = outcome.ladder, outcome.rig
    if ladder is None or ladder.refusal:
        return None
    figure = gain_ladder(ladder, response_unit=rig.response_unit, command_unit=rig.command_unit)
    return Picture("ladder", f"Gain ladder of {len(ladder.rungs)} rungs above an open-loop move", figure)


def log_picture(outcome: Outcome, fit: Fit, place: int) -> Picture:
    """One fitted record beside its model."""
    from .log_and_fit import log_and_fit

    rig, run = outcome.rig, fit.runs[place]
    figure = log_and_fit(run, command_unit=rig.command_unit, response_unit=rig.response_unit)
    return Picture(f"log-{place}", f"Command, response with model, and residual of {run.label}", figure)


def table_picture(outcome: Outcome, fit: Fit, table: FittedTable, name: str) -> Picture:
    """A frequency table over the fitted plant."""
    from .frequency_table import frequency_table

    rig = outcome.rig
    figure = frequency_table(table, fit.plant, gain_unit=f"{rig.response_unit}/{rig.command_unit}")
    return Picture(name, f"Frequency table {table.label} over the fitted plant's response, with 95 % errors", figure)


def locus_picture(outcome: Outcome, fit: Fit, design: Design) -> Picture:
    """The locus with the chosen point."""
    from .locus import locus, view_of
    from .locus_lines import at_gain, locus_lines

    loop = open_loop(design.gains, fit.plant, outcome.rig.setting)
    found = working(loop, design.selection.pole)
    lines = locus_lines(loop, view_of(found))
    others = [complex(s) for s in at_gain(loop, lines, found.loop_gain)]
    figure = locus(lines, found, sampled_pole=design.selection.sampled_pole, others=others)
    return Picture("locus", "Locus with the chosen point and the vectors of the magnitude condition", figure)


def two_loci_picture(outcome: Outcome) -> Picture | None:
    """The locus before a change and the one after it; None where no earlier sheet with a chosen pole stands beside."""
    from .two_loci import Locus, two_loci

    fit, design, found = outcome.fit, outcome.design, outcome.retuned
    if fit is None or design is None or found is None:
        return None
    earlier, setting = found.earlier, outcome.rig.setting
    part = earlier.sheet["selection"] or (earlier.sheet.get("candidate") or {}).get("selection")
    if not part or part["pole"] is None:
        return None
    before = Locus(
        open_loop(earlier.gains, earlier.known.plant, setting), abs(loop_gain(earlier.gains)), complex(*part["pole"])
    )
    after = Locus(
        open_loop(design.gains, fit.plant, setting), abs(loop_gain(design.gains)), complex(design.selection.pole)
    )
    return Picture("two-loci", "Locus before and after the change, with the chosen poles", two_loci(before, after))


def margins_picture(outcome: Outcome, fit: Fit, design: Design) -> Picture | None:
    """The sampled loop over frequency with its margins; None for a controller that isn't sampled."""
    from ...design.loop_response import loop_response
    from .margins import margins

    setting = outcome.rig.setting
    if setting.continuous:
        return None
    figure = margins(loop_response(design.gains, fit.plant, fit.plausible, setting))
    return Picture("margins", "Size, angle and sensitivity of the loop over frequency, with the margins", figure)


def held_out_picture(outcome: Outcome, place: int) -> Picture | None:
    """A held-out record over its prediction; None where it has none."""
    from .held_out import held_out

    rig, compared = outcome.rig, outcome.closing[place]
    if compared.table is not None and outcome.fit is not None:
        return table_picture(outcome, outcome.fit, compared.table, f"held-out-{place}")
    if len(compared.time) < 2 or not math.isfinite(float(compared.predicted[-1])):
        return None
    figure = held_out(compared, command_unit=rig.command_unit, response_unit=rig.response_unit)
    return Picture(f"held-out-{place}", f"Held-out record {compared.label} over its prediction", figure)
