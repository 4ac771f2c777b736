"""The further forms of the gains for sheet and report, with the reason where a form does not exist."""

import math
from typing import Any

from ..design.further_forms import Missing, Spans, further_forms, why_missing
from ..design.gains import Gains
from .forms_as_printed import forms_as_printed
from .rigfile.rig import Rig


def spans_of(rig: Rig) -> Spans:
    """Ranges that the rig file states for its signals; for the command its limits do, where both are there."""
    limits = rig.limits
    command = _span(rig, "command") or _width(limits.command_lowest, limits.command_highest)
    return Spans(command, _span(rig, "response"))


def _span(rig: Rig, role: str) -> float | None:
    signal = rig.signals.get(role)
    return None if signal is None else _width(signal.lowest, signal.highest)


def _width(low: float | None, high: float | None) -> float | None:
    if low is None or high is None or not math.isfinite(high - low) or high <= low:
        return None
    return high - low


def further_forms_as_printed(gains: Gains, rig: Rig) -> dict[str, Any]:
    """Every further form as JSON values; one that does not exist is None."""
    found = _further(gains, rig)
    return {
        name: None
        if isinstance(form, Missing)
        else {key: {"value": float(each.value), "unit": each.unit} for key, each in form.items()}
        for name, form in found.items()
    }


def missing_forms(gains: Gains, rig: Rig) -> dict[str, str]:
    """A sentence for each form that does not exist, the four of the sheet and the further ones."""
    four = forms_as_printed(gains, rig.command_unit, rig.response_unit)
    why = why_missing(gains)
    reasons = {name: why.get(name, "") for name, form in four.items() if form is None}
    reasons |= {name: form.why for name, form in _further(gains, rig).items() if isinstance(form, Missing)}
    return {name: f"does not exist for these gains: {reason}" for name, reason in reasons.items()}


def _further(gains: Gains, rig: Rig) -> dict[str, Any]:
    interval = None if rig.setting.continuous else rig.setting.update_interval
    return dict(further_forms(gains, rig.command_unit, rig.response_unit, interval, spans_of(rig)))
