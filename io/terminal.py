"""The verdict on one screen: may I, the gains, what to expect, the limits, why not, and what to mind."""

import textwrap
from collections.abc import Iterable, Iterator
from typing import Any

from ..design.designed import Design, Judged
from .cautions import FIRST_RUN
from .figures.words import number, one_line, with_unit
from .forms_as_printed import forms_as_printed
from .outcome import Outcome
from .report import words
from .report.changed import verdict
from .report.wishes import wish_sentence
from .retuned import Retuned

_CODES = {"good": "1;36", "bad": "1;31", "strong": "1", "quiet": "2"}
MOST_CAUTIONS, MOST_REASONS = 3, 6


def verdict_text(outcome: Outcome, width: int = 100, *, colour: bool) -> str:
    """The job's verdict for a terminal.

    Parameters
    ----------
    outcome : Outcome
    width : int
        Columns; lines are kept to it, down to 60.
    colour : bool
        False for a pipe: no escape sequence is written then.

    Returns
    -------
    str
        Lines without a newline at the end. Names from logs and rig files can't move the cursor.
    """
    paint = _Paint(colour)
    width = max(60, min(width, 120))
    parts = [_headline(outcome, paint, width), *_reasons(outcome, width)]
    if outcome.retuned is not None:
        parts += ["", *_changed(outcome.retuned, paint, width)]
    if outcome.design is not None:
        parts += ["", *_gains(outcome, outcome.design, paint, width)]
        parts += ["", *_requirements(outcome.design, paint)]
        parts += ["", *_limits(outcome, outcome.design, paint)]
    parts += ["", *_held_out(outcome, width)]
    parts += ["", *_wishes(outcome, width)] if outcome.wishes else []
    parts += ["", *_cautions(outcome, width)]
    return "\n".join(parts)


class _Paint:
    """Colour codes around a text, or none."""

    def __init__(self, on: bool) -> None:
        self.on = on

    def __call__(self, text: str, kind: str) -> str:
        return f"\x1b[{_CODES[kind]}m{text}\x1b[0m" if self.on else text


def _headline(outcome: Outcome, paint: _Paint, width: int) -> str:
    mark = paint(words.headline(outcome), "good" if outcome.status == "released" else "bad")
    said = (
        "checked by calculation; the responsible person still approves"
        if outcome.status == "released"
        else "don't load these gains"
    )
    room = max(12, width - len(words.headline(outcome)) - len(said) - 4)
    name = one_line(outcome.rig.name)
    return f"{mark}  {name if len(name) <= room else name[: room - 1] + '…'}: {said}"


def _reasons(outcome: Outcome, width: int) -> Iterator[str]:
    yield from _bullets(outcome.reasons, width, MOST_REASONS, "reasons")


def _bullets(items: Iterable[str], width: int, most: int, what: str) -> Iterator[str]:
    texts = [one_line(item) for item in items]
    for text in texts[:most]:
        yield from textwrap.wrap(text, width, initial_indent="  - ", subsequent_indent="    ")
    if len(texts) > most:
        yield f"  - and {len(texts) - most} more {what}, in the report"


def _changed(found: Retuned, paint: _Paint, width: int) -> Iterator[str]:
    yield paint("Since the earlier sheet", "strong")
    yield from textwrap.wrap(verdict(found), width, initial_indent="  ", subsequent_indent="  ")
    for row in found.changed.parameters:
        ends = f"{number(row.low, 3)} to {number(row.high, 3)}"
        mark = "  CHANGED" if row.changed else ""
        name, unit = one_line(row.name), row.unit
        yield f"  {name:<22}{with_unit(row.before, unit)} -> {with_unit(row.after, unit)} (by {ends}){mark}"
    text = f"Old gains: {found.old.verdict.upper()}, {found.old.why}"
    yield from textwrap.wrap(text, width, initial_indent="  ", subsequent_indent="  ")


def _gains(outcome: Outcome, design: Design, paint: _Paint, width: int) -> Iterator[str]:
    rig, selection = outcome.rig, design.selection
    title = "Gains" if outcome.status == "released" else "Candidate gains, not released"
    yield paint(f"{title}: {design.gains.structure}, {words.action(design)}", "strong")
    for name, form in forms_as_printed(design.gains, rig.command_unit, rig.response_unit).items():
        if name == "zero-pole" and form is None:
            continue
        yield from textwrap.wrap(f"{name:<10}{_form(form)}", width, initial_indent="  ", subsequent_indent=" " * 12)
    gain = with_unit(selection.loop_gain, selection.loop_gain_unit)
    pace = "continuous" if design.continuous else f"update every {words.every(design.law.update_interval)}"
    yield f"  {pace}; loop gain K = {gain} {_range(design)}".rstrip()


def _form(form: dict[str, Any] | None) -> str:
    if form is None:
        return "does not exist for these gains"
    parts = [
        f"{words.spaced(key)} {with_unit(each['value'], each['unit'], 7)}"
        for key, each in form.items()
        if each is not None and each["value"] not in (None, 0.0)
    ]
    return ", ".join(parts)


def _range(design: Design) -> str:
    chosen = design.selection.loop_gain
    for low, high in design.selection.intervals_plausible:
        if (low or 0.0) <= chosen and (high is None or chosen <= high):
            ends = f"{number(low or 0.0)} to {number(high) if high is not None else 'no upper end'}"
            return f"(on the plausible plants all hold from {ends})"
    return ""


def _requirements(design: Design, paint: _Paint) -> Iterator[str]:
    if not design.judged:
        yield "No requirement was stated."
        return
    yield paint(f"{'Requirement':<30}{'asked':<18}{'predicted':>12}  {'95 % of plants':<22}{'slack':>7}", "strong")
    for each in design.judged:
        name = words.in_words(each.requirement) + (" (floor)" if each.floor else "")
        line = (
            f"  {name:<28}{words.bound(each.requirement):<18}"
            f"{words.scaled(each.predicted, each.requirement):>12}  {words.interval(each):<22}{slack(each):>7}"
        )
        yield line if each.met else paint(f"{line}  NOT MET", "bad")


def slack(judged: Judged) -> str:
    """Room between the limit and the worse end of the 95 % interval, in per cent of the limit; below zero it is missed.

    Examples
    --------
    >>> from ..design.requirements import Requirement
    >>> slack(Judged(Requirement("settling_time", 2.0, "at_most", "s"), 1.0, 0.9, 1.5, True))
    '25 %'
    """
    asked = judged.requirement
    worse = judged.high if asked.sense == "at_most" else judged.low
    if worse is None:
        return "none"
    if worse in (float("inf"), float("-inf")) or asked.limit == 0.0:
        return "" if asked.limit == 0.0 else number(worse)
    room = asked.limit - worse if asked.sense == "at_most" else worse - asked.limit
    return f"{number(100.0 * room / abs(asked.limit), 2)} %"


def _limits(outcome: Outcome, design: Design, paint: _Paint) -> Iterator[str]:
    yield paint(f"{'Hardware limit':<30}{'at':<18}{'worst':>12}  {'headroom':<22}", "strong")
    for each in design.limits:
        line = (
            f"  {each.name:<28}{with_unit(each.limit, each.unit):<18}{with_unit(each.predicted_worst, each.unit):>12}"
            f"  {with_unit(each.headroom, each.unit, 3)}"
        )
        yield line if each.met else paint(f"{line}  PASSED", "bad")
    yield f"  {words.clamped(design)}"


def _held_out(outcome: Outcome, width: int) -> Iterator[str]:
    if not outcome.closing:
        yield "No held-out run."
    for compared in outcome.closing:
        text = f"Held-out {one_line(compared.label)} {compared.verdict}: {one_line(compared.why)}"
        yield from textwrap.wrap(text, width, subsequent_indent="  ")


def _wishes(outcome: Outcome, width: int) -> Iterator[str]:
    unit = outcome.design.selection.loop_gain_unit if outcome.design else ""
    for answer in outcome.wishes:
        yield from textwrap.wrap(wish_sentence(answer, unit), width, subsequent_indent="  ")


def _cautions(outcome: Outcome, width: int) -> Iterator[str]:
    own = [each for each in outcome.cautions if each not in FIRST_RUN]
    if own:
        yield "Mind:"
        yield from _bullets(own, width, MOST_CAUTIONS, "cautions")
    yield from textwrap.wrap(
        "Before the first run: guard, try the emergency stop, isolate and block stored energy; end stops and cut-outs "
        "must act independently of this loop. The report says more.",
        width,
    )
