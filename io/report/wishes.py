"""Answers to wished closed-loop poles in words and tables, for the page and the terminal."""

import math

from ..figures.words import number, one_line, with_unit
from ..outcome import Outcome
from ..wish import Answer
from . import tables
from .tables import Table

HEAD = ("wished pole (1/s)", "K = 1/|G_L| there", "angle off by", "nearest point of the locus (1/s)", "K there",
        "requirements there")  # fmt: skip
CAPTION = "Wished poles, with the zeros that were chosen"
NOTHING = "nothing was designed, so there is no locus to hold it against"


def wishes_table(outcome: Outcome) -> Table | None:
    """One row a wish; None where none was made or nothing was designed."""
    unit = outcome.design.selection.loop_gain_unit if outcome.design else ""
    rows = tuple(_row(answer, unit) for answer in outcome.wishes if answer.found is not None)
    return Table(CAPTION, HEAD, rows) if rows else None


def wish_workings(outcome: Outcome) -> tuple[Table, ...]:
    """The working of the magnitude condition at each wished point that has one."""
    if outcome.design is None:
        return ()
    unit = outcome.design.selection.loop_gain_unit
    found = []
    for answer in outcome.wishes:
        if answer.working is not None:
            table = tables.magnitude(answer.working, unit)
            found.append(Table(f"Working at the wished point {wished_words(answer)}", *_rest(table)))
    return tuple(found)


def _rest(table: Table) -> tuple[tuple[str, ...], tuple[tuple[str, ...], ...], tuple[int, ...]]:
    return table.head, table.rows, table.emphasis


def wish_sentence(answer: Answer, unit: str) -> str:
    """One wish and its answer in one sentence; `unit` of K."""
    head = f"Wished pole {wished_words(answer, ' 1/s')}"
    found = answer.found
    if found is None:
        return f"{head}: {NOTHING}"
    if found.on_locus:
        return f"{head} is on the locus at K = {_gain(found.point.loop_gain, unit)}{_met(answer)}"
    there = ""
    if math.isfinite(found.point.loop_gain):
        there = (
            f" (angle off by {number(abs(found.point.angle_residual_deg), 4)} deg; 1/|G_L| = "
            f"{_gain(found.point.loop_gain, unit)})"
        )
    near = tables.point(found.nearest.point)
    return (
        f"{head} is not on the locus of these zeros{there}; the nearest point is {near} 1/s, "
        f"{with_unit(found.distance, '1/s', 4)} away, at K = {_gain(found.nearest.loop_gain, unit)}{_met(answer)}"
    )


def wished_words(answer: Answer, unit: str = "") -> str:
    """The wished point, with what was typed where that was no point."""
    typed = one_line(answer.wish.text)
    return tables.point(answer.wish.point) + unit + (f" ({typed})" if typed[:1].isalpha() else "")


def _row(answer: Answer, unit: str) -> tuple[str, ...]:
    found = answer.found
    assert found is not None
    finite = math.isfinite(found.point.loop_gain) or found.on_locus
    off = f"{number(found.point.angle_residual_deg, 4)} deg" if math.isfinite(found.point.angle_residual_deg) else ""
    return (
        wished_words(answer),
        _gain(found.point.loop_gain, unit) if finite else "too far away",
        f"{off}: on the locus" if found.on_locus else off,
        "itself" if found.on_locus else tables.point(found.nearest.point),
        "" if found.on_locus else _gain(found.nearest.loop_gain, unit),
        _met(answer).removeprefix(", where "),
    )


def _gain(gain: float, unit: str) -> str:
    if gain == 0.0:
        return "0 (a pole of the open loop, where a branch starts)"
    if math.isinf(gain):
        return "∞ (a zero of the open loop, where a branch ends)"
    return with_unit(gain, unit, 6)


def _met(answer: Answer) -> str:
    if answer.holds is None:
        return ""
    if answer.holds_plausible:
        return ", where everything asked for holds on the plausible plants"
    return f", where {'everything' if answer.holds else 'not everything'} asked for holds on the fitted plant"
