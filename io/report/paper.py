"""The paper sheet: one page for the folder at the rig, printed before the report, with a line to sign."""

from typing import Any

from ..figures.words import number, with_unit
from ..forms_as_printed import forms_as_printed
from ..outcome import Outcome
from ..validity import Span, Validity, validity_of
from . import tables, words
from .ladder import table as ladder_table

MOST_REASONS = 8
SAFE = (
    "Before the first run: guard what moves, heats or is under pressure; try the emergency stop; isolate and block "
    "stored energy; end stops and cut-outs must act independently of this loop. Start at rung 0."
)
SIGNED = (
    "Checked by calculation only. The person responsible for the rig approves the first run, under the rules that hold "
    "here."
)


def paper_of(outcome: Outcome) -> dict[str, Any]:
    """What stands on the paper sheet; gains of a held sheet are left out, so that nobody types them in from paper."""
    released = outcome.status == "released" and outcome.design is not None
    return {
        "released": released,
        "forms": _forms(outcome) if released else (),
        "kind": _kind(outcome) if released else "",
        "reasons": outcome.reasons[:MOST_REASONS],
        "valid": tuple(_valid(validity_of(outcome), outcome)),
        "asked": _asked(outcome),
        "ladder": _ladder(outcome) if released else None,
        "safe": SAFE,
        "signed": SIGNED,
        "trail": tuple(_trail(outcome)),
    }


def _kind(outcome: Outcome) -> str:
    design = outcome.design
    assert design is not None
    pace = (
        "continuous" if outcome.rig.setting.continuous else f"updated every {words.every(design.law.update_interval)}"
    )
    weight = number(design.gains.setpoint_weight)
    return f"{design.gains.structure}, {words.action(design)}; {pace}; setpoint weight {weight}"


def _forms(outcome: Outcome) -> tuple[tables.Form, ...]:
    """The forms that exist."""
    design, rig = outcome.design, outcome.rig
    assert design is not None
    every = tables.forms(forms_as_printed(design.gains, rig.command_unit, rig.response_unit))
    return tuple(form for form in every if form.rows is not None)


def _valid(found: Validity, outcome: Outcome) -> list[tuple[str, str]]:
    rig, design = outcome.rig, outcome.design
    rows = [
        ("command seen in the logs", _range(found.command, rig.command_unit)),
        ("response seen in the logs", _range(found.response, rig.response_unit)),
    ]
    if found.operating_command is not None:
        point = f"{with_unit(found.operating_command, rig.command_unit)} at {{}}"
        rows.append(("operating point", point.format(with_unit(found.operating_response, rig.response_unit))))
    if found.test_step is not None:
        rows.append(("setpoint steps up to", with_unit(abs(found.test_step), rig.response_unit)))
    if design is not None:
        rows.append(("command clamp, from there", words.clamp_in_words(design.law.clamp, rig.command_unit)))
    dates = f"made {found.made}" + (f", logs of {words.listed(found.taken)}" if found.taken else "")
    rows.append(("date", dates))
    rows.append(("until", "the rig is changed mechanically, or a recheck says otherwise"))
    return rows


def _range(span: Span | None, unit: str) -> str:
    return "none was fitted" if span is None else f"{number(span[0])} to {with_unit(span[1], unit)}"


def _asked(outcome: Outcome) -> tuple[tuple[str, ...], ...]:
    """Requirement, bound, prediction, interval; then the limits with what is left."""
    design = outcome.design
    if design is None:
        return ()
    wishes = [
        (
            words.in_words(each.requirement),
            words.bound(each.requirement),
            words.scaled(each.predicted, each.requirement),
            words.interval(each),
        )
        for each in design.judged
    ]
    worst = "worst plausible plant"
    limits = [
        (each.name, with_unit(each.limit, each.unit), with_unit(each.predicted_worst, each.unit), worst)
        for each in design.limits
    ]
    return (*wishes, *limits)


def _ladder(outcome: Outcome) -> tables.Table | None:
    ladder = outcome.ladder
    return ladder_table(ladder, outcome.rig) if ladder is not None and ladder.rungs else None


def _trail(outcome: Outcome) -> list[str]:
    made = outcome.provenance
    rig_file = made.get("rig_file", {})
    text = f"gainwright {made.get('gainwright', '')}, rig file sha256 {str(rig_file.get('sha256', ''))[:16]}"
    replaces = made.get("replaces")
    logs = [f"{each['file']} {str(each['sha256'])[:12]}" for each in made.get("runs", [])]
    said = [text, "logs: " + ", ".join(logs[:6]) + (f" and {len(logs) - 6} more" if len(logs) > 6 else "")]
    if replaces:
        said.append(f"replaces the sheet {str(replaces['sha256'])[:16]} of {str(replaces['created'])[:10]}")
    return said
