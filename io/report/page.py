"""The report of an outcome as one self-contained HTML page."""

from collections.abc import Callable, Sequence
from importlib.resources import files
from pathlib import PurePath
from typing import Any

from ...design.aside import Pending
from ...design.compensator import open_loop
from ...design.designed import Design
from ...design.locus.condition import working
from ...ident.fitted import Fit
from ...ident.law import Law
from ..cautions import FIRST_RUN
from ..figures.svg import variables
from ..figures.words import number, with_unit
from ..forms_as_printed import forms_as_printed
from ..further_forms import further_forms_as_printed, missing_forms
from ..outcome import Outcome
from . import pictures, tables, words
from .changed import changed_of
from .crossings import crossings
from .ladder import ladder_of
from .moving import moving_part
from .paper import paper_of
from .wishes import wish_workings, wishes_table

Part = dict[str, Any]


def report_html(outcome: Outcome, parts: Sequence[Pending[Part]] = ()) -> str:
    """The whole report; nothing in it is fetched from elsewhere, and names from logs are escaped.

    Parameters
    ----------
    outcome : Outcome
    parts : sequence of Pending
        What each of `PARTS` gives, in their order, where they are being made aside already.

    Returns
    -------
    str
        An HTML document.
    """
    from jinja2 import Environment, StrictUndefined
    from markupsafe import Markup

    environment = Environment(autoescape=True, undefined=StrictUndefined, trim_blocks=True, lstrip_blocks=True)
    template = environment.from_string(_resource("page.html"))
    moving = moving_part(outcome)
    made = [part.result() for part in reversed(parts)]  # the last one may not have been begun: it is made here then
    rest = {key: value for part in made or [work(outcome) for work in PARTS] for key, value in part.items()}
    return template.render(page=rest, style=Markup(_style()), moving=moving)


def answer_of(outcome: Outcome) -> Part:
    """The upper part of the page by name, but the moving sheet: may I, what, what then."""
    return _safe_pictures(_top(outcome))


def evidence_of(outcome: Outcome) -> Part:
    """The lower part of the page by name: how we know."""
    return _safe_pictures(_knowing(outcome))


PARTS: tuple[Callable[[Outcome], Part], ...] = (answer_of, evidence_of)
_PICTURES = ("step", "ribbon", "headroom", "locus", "margins")


def _safe_pictures(page: Part) -> Part:
    """Mark the pictures, whose texts are escaped already, as markup."""
    from markupsafe import Markup

    page.update({name: Markup(page[name]) for name in _PICTURES if name in page})
    for kind in ("ladder", "changed"):
        if page.get(kind):
            page[kind] = {**page[kind], "picture": Markup(page[kind]["picture"])}
    for kind in ("logs", "tables", "closing"):
        if kind in page:
            page[kind] = tuple((about, Markup(svg)) for about, svg in page[kind])
    return page


def _resource(name: str) -> str:
    return files(__package__).joinpath(name).read_text(encoding="utf-8")


def _style() -> str:
    dark = f"@media screen and (prefers-color-scheme: dark) {{ :root {{ {variables('dark')} }} }}"
    return f":root {{ {variables('light')} }} {dark}\n{_resource('look.css')}"


def _top(outcome: Outcome) -> dict[str, Any]:
    """What an engineer asks first: may I, what, what then, how much room, what to mind."""
    released = outcome.status == "released"
    page: dict[str, Any] = {
        "name": outcome.rig.name,
        "status": outcome.status,
        "mark": words.headline(outcome),
        "cells": _cells(outcome),
        "verdict": words.RELEASED if released else words.HELD,
        "reasons": outcome.reasons,
        "checked": "",
        "design": outcome.design,
        "headroom": pictures.headroom_picture(outcome),
        "cautions": tuple(each for each in outcome.cautions if each not in FIRST_RUN),
        "usual": FIRST_RUN,
        "changed": changed_of(outcome),
        "paper": paper_of(outcome),
    }
    if outcome.design is not None:
        page.update(_designed(outcome, outcome.design))
    return page


def _cells(outcome: Outcome) -> tuple[tuple[str, str], ...]:
    made = str(outcome.provenance.get("created", "")).replace("T", " ")[:16]
    design = outcome.design
    cells = (
        ("plant", outcome.fit.structure if outcome.fit else "none"),
        ("controller", design.gains.structure if design else "none"),
        ("rig file", PurePath(outcome.rig.file).name),
        ("made", made),
    )
    return tuple(cell for cell in cells if cell[1])


def _designed(outcome: Outcome, design: Design) -> dict[str, Any]:
    rig = outcome.rig
    missing = missing_forms(design.gains, rig)
    return {
        "checked": words.checked_on(design, rig.requirements.confidence),
        "action": words.action(design),
        "use": words.USE if outcome.status == "released" else words.STUDY,
        "forms": tables.forms(forms_as_printed(design.gains, rig.command_unit, rig.response_unit), missing),
        "further_forms": tables.forms(further_forms_as_printed(design.gains, rig), missing),
        "settings": _settings(outcome, design),
        "law": CONTINUOUS if design.continuous else law_text(design.law),
        "requirements": tables.requirements(design),
        "step": pictures.step_picture(outcome, design),
        "step_guide": _step_guide(outcome),
        "ribbon": pictures.ribbon_picture(design),
        "limits": tables.limits(design),
        "ladder": ladder_of(outcome),
        "clamped": words.clamped(design),
    }


CONTINUOUS = "none: the controller is continuous, and the forms above are the whole of it"


def _settings(outcome: Outcome, design: Design) -> tuple[tuple[str, str], ...]:
    rig, fit = outcome.rig, outcome.fit
    rows = [
        ("update interval", "none: continuous" if design.continuous else with_unit(design.law.update_interval, "s", 6)),
        ("computation delay", with_unit(rig.setting.computation_delay, "s", 6)),
        ("setpoint weight", number(design.gains.setpoint_weight)),
        ("clamp, from the operating point", words.clamp_in_words(design.law.clamp, rig.command_unit)),
    ]
    if fit is not None:
        low, high = fit.operating_command_interval
        place = f"command {with_unit(fit.operating_command, rig.command_unit)} ({number(low)} to {number(high)})"
        rows.append(("operating point", f"{place}, response {with_unit(fit.operating_response, rig.response_unit)}"))
    return tuple(rows)


def law_text(law: Law) -> str:
    """The difference equation written out; r setpoint, y response, v wanted and u sent command.

    Examples
    --------
    >>> print(law_text(Law(0.1, (1.0, -1.0), (2.0, -1.9), (2.0, -1.9), (1.0,))))
    v[k] = 2 r[k] - 1.9 r[k-1]
           - 2 y[k] + 1.9 y[k-1]
           + 1 u[k-1]
    u[k] = v[k] limited by the clamp
    """
    sent, wanted = _memory(law)
    lines = [_terms(law.setpoint, "r"), _terms([-c for c in law.response], "y"), _terms(sent, "u"), _terms(wanted, "v")]
    shown = [line for line in lines if line]
    head = shown[0].removeprefix("+ ")
    return "\n".join([f"v[k] = {head}", *(f"       {line}" for line in shown[1:]), "u[k] = v[k] limited by the clamp"])


def _memory(law: Law) -> tuple[list[float], list[float]]:
    size = max(len(law.command), len(law.memory))
    command = [*law.command, *[0.0] * (size - len(law.command))]
    memory = [*law.memory, *[0.0] * (size - len(law.memory))]
    sent = [0.0, *(m - c for m, c in zip(memory[1:], command[1:], strict=True))]
    return sent, [0.0, *(-m for m in memory[1:])]


def _terms(coefficients: tuple[float, ...] | list[float], sign: str) -> str:
    parts = []
    for back, value in enumerate(coefficients):
        if value != 0.0:
            place = "k" if back == 0 else f"k-{back}"
            parts.append(f"{'-' if value < 0 else '+'} {number(abs(value), 12)} {sign}[{place}]")
    return " ".join(parts)


def _step_guide(outcome: Outcome) -> str:
    asked, unit = outcome.rig.requirements, outcome.rig.response_unit
    size = "" if asked.test_step is None else f" of {with_unit(asked.test_step, unit)}"
    return (
        f"How to read it: the test step{size} as predicted with the sampled law and its clamp. The full line is the "
        "fitted plant; the bands hold 95 % of the plausible plants at each time. Bounds that were asked for are drawn "
        "dash-dotted, and as a bracket from the time at which the response must have settled."
    )


def _knowing(outcome: Outcome) -> dict[str, Any]:
    """How we know: logs, plant, locus, held-out run, origin."""
    held_out = pictures.held_out_pictures(outcome)
    page: dict[str, Any] = {
        "findings": tables.findings(outcome),
        "logs": pictures.log_pictures(outcome),
        "tables": pictures.table_pictures(outcome),
        "more_logs": _more_logs(outcome),
        "fit": outcome.fit,
        "working": None,
        "closing": tuple(zip(outcome.closing, held_out, strict=True)),
        "closing_numbers": tuple(words.agreement(each) for each in outcome.closing),
        "closing_seen": tuple(tables.seen(each, outcome.rig) for each in outcome.closing),
        "origin": tables.origin(outcome.provenance),
        "provenance": tables.logs(outcome),
    }
    if outcome.fit is not None:
        page.update(_fitted(outcome, outcome.fit))
    if outcome.fit is not None and outcome.design is not None:
        page.update(_located(outcome, outcome.fit, outcome.design))
    return page


def _more_logs(outcome: Outcome) -> str:
    left = outcome.fit.runs[pictures.MOST_LOGS :] if outcome.fit else ()
    return f"Fitted as well, and not drawn here: {words.listed([run.label for run in left])}." if left else ""


def _fitted(outcome: Outcome, fit: Fit) -> dict[str, Any]:
    rig = outcome.rig
    ties = (
        f"The records can't tell it from: {words.listed(fit.ties)}. Plants of those structures are among the plausible "
        "ones."
    )
    return {
        "ties": ties if fit.ties else "",
        "parameters": tables.parameters(fit, rig.command_unit, rig.response_unit),
        "candidates": tables.candidates(fit),
        "noise": _noise(fit, rig.response_unit),
    }


def _noise(fit: Fit, unit: str) -> str:
    """Misfit and noise; a plant that no log in time gave has none that is known."""
    over = "the spread of the response" if fit.runs or not fit.tables else "the size of the points"
    misfit = f"Misfit {number(fit.misfit, 3)} (rms residual over {over})."
    if fit.noise.std <= 0.0:
        unknown = "The noise of the response is not known: no log in time tells it."
        return f"{misfit} {unknown}" if fit.tables else unknown
    wander = ", a wandering level rather than a stationary one." if fit.drift else "."
    return f"{misfit} Measurement noise: {with_unit(fit.noise.std, unit, 3)} standard deviation{wander}"


def _located(outcome: Outcome, fit: Fit, design: Design) -> dict[str, Any]:
    loop = open_loop(design.gains, fit.plant, outcome.rig.setting)
    selection = design.selection
    found = working(loop, selection.pole)
    return {
        "working": tables.magnitude(found, selection.loop_gain_unit),
        "locus": pictures.locus_picture(outcome, fit, design),
        "margins": pictures.margins_picture(outcome, fit, design),
        "tried": tables.tried(design),
        "wishes": wishes_table(outcome),
        "wish_workings": wish_workings(outcome),
        "crossings": crossings(loop, selection.pole, selection.loop_gain_unit),
        "angle": (
            f"The angle condition holds at {tables.point(selection.pole)} 1/s within "
            f"{number(abs(selection.angle_residual_deg), 2)} deg, so the magnitude condition may be used there. "
            f"The exact pole of the sampled loop, ln z/T, stands at {tables.point(selection.sampled_pole)} 1/s, "
            f"{number(100.0 * abs(selection.sampled_pole - selection.pole) / abs(selection.pole), 2)} % from it; above "
            "5 % it is a caution."
        ),
    }
