"""The gain sheet: an outcome as the JSON document that other programs read."""

import json
import math
from collections.abc import Sequence
from dataclasses import asdict
from typing import Any

import numpy as np

from ..design.closing.compared import Compared
from ..design.designed import Design, GainInterval, LimitJudged, Selection
from ..design.gains import Gains
from ..ident.fitted import Fit, Parameter
from .asked import asked_of
from .change_rows import change_row
from .forms_as_printed import forms_as_printed
from .further_forms import further_forms_as_printed, missing_forms
from .ladder_rows import bounded, ladder_rows, law_row
from .outcome import Outcome
from .parameter_unit import unit_of
from .provenance import window_of
from .record import Source
from .requirement_row import requirement_row
from .rigfile.rig import Rig
from .sight_rows import sight_row
from .validity import validity_row
from .wish_rows import wish_rows

SCHEMA = "gainwright.gain-sheet/1"
NO_LADDER = "no gain ladder was made: the first run on the rig starts at the responsible person's own discretion"


class SheetError(RuntimeError):
    """A sheet that must not be written: a fault of the program, never of the person or the record."""


def sheet_of(outcome: Outcome) -> dict[str, Any]:
    """The whole gain sheet.

    A released sheet carries `controller` and `selection`; a held one has null there and the same under `candidate`, so
    that nothing loads them by mistake.

    Parameters
    ----------
    outcome : Outcome

    Returns
    -------
    dict
        Of JSON values; every number finite.

    Raises
    ------
    SheetError
        When a number is not finite, or the status contradicts the reasons.
    """
    released = outcome.status == "released"
    if released == bool(outcome.reasons) or (released and outcome.design is None):
        raise SheetError(f"status {outcome.status} with {len(outcome.reasons)} reasons")
    chosen = _chosen(outcome)
    rungs = ladder_rows(outcome.ladder, outcome.rig)
    sheet = {
        "schema": SCHEMA,
        "status": outcome.status,
        "reasons": list(outcome.reasons),
        "cautions": [*outcome.cautions, *([] if rungs else [NO_LADDER])],
        "rig": _rig(outcome),
        "operating_point": _operating_point(outcome),
        "plant": _plant(outcome),
        "controller": chosen["controller"] if chosen and released else None,
        "selection": chosen["selection"] if chosen and released else None,
        "requirements": [requirement_row(each) for each in outcome.design.judged] if outcome.design else [],
        "checked": _checked(outcome.design, outcome.rig.requirements.confidence) if outcome.design else None,
        "limits": [_limit(each) for each in outcome.design.limits] if outcome.design else [],
        "ladder": rungs,
        "change": change_row(outcome.retuned),
        "closing": _closing(outcome),
        "asked": asked_of(outcome.rig),
        "validity": validity_row(outcome),
        "wishes": wish_rows(outcome),
        "provenance": outcome.provenance,
    }
    if not released:
        sheet["candidate"] = chosen
    refuse_numbers_that_are_none(sheet)
    return sheet


def sheet_bytes(sheet: dict[str, Any]) -> bytes:
    """The sheet as UTF-8 JSON; floats in their shortest form that reads back exactly (up to 17 digits)."""
    return (json.dumps(sheet, indent=2, ensure_ascii=False, allow_nan=False) + "\n").encode()


def refuse_numbers_that_are_none(value: Any, place: str = "sheet") -> None:
    """Raise where a number is NaN or infinite, or a value is no JSON value; `place` names it.

    Raises
    ------
    SheetError

    Examples
    --------
    >>> refuse_numbers_that_are_none({"plant": {"dead_time": float("nan")}})
    Traceback (most recent call last):
        ...
    gainwright.io.sheet.SheetError: sheet.plant.dead_time is nan, and a sheet holds finite numbers only
    """
    if isinstance(value, dict):
        for key, item in value.items():
            refuse_numbers_that_are_none(item, f"{place}.{key}")
    elif isinstance(value, list | tuple):
        for index, item in enumerate(value):
            refuse_numbers_that_are_none(item, f"{place}[{index}]")
    elif isinstance(value, float):
        if not math.isfinite(value):
            raise SheetError(f"{place} is {value}, and a sheet holds finite numbers only")
    elif not isinstance(value, str | int | None):
        raise SheetError(f"{place} is a {type(value).__name__}, and a sheet holds JSON values only")


def _rig(outcome: Outcome) -> dict[str, Any]:
    rig = outcome.rig
    units = {"time": "s", "command": rig.command_unit, "response": rig.response_unit, "setpoint": rig.response_unit}
    return {
        "name": rig.name,
        "signals": {
            role: {"source": signal.source, "unit": signal.unit or units.get(role)}
            for role, signal in rig.signals.items()
        },
    }


def _operating_point(outcome: Outcome) -> dict[str, Any] | None:
    fit, rig = outcome.fit, outcome.rig
    if fit is None:
        return None
    return {
        "command": {
            "value": float(fit.operating_command),
            "unit": rig.command_unit,
            "interval_95": [float(bound) for bound in fit.operating_command_interval],
        },
        "response": {"value": float(fit.operating_response), "unit": rig.response_unit},
    }


def _plant(outcome: Outcome) -> dict[str, Any] | None:
    fit, rig = outcome.fit, outcome.rig
    if fit is None:
        return None
    return {
        "structure": fit.structure,
        "explanation": fit.explanation,
        "numerator": [float(c) for c in fit.plant.numerator],
        "denominator": [float(c) for c in fit.plant.denominator],
        "command_unit": rig.command_unit,
        "response_unit": rig.response_unit,
        "dead_time": float(fit.plant.dead_time),
        "parameters": {
            each.name: _parameter(each, fit, rig.command_unit, rig.response_unit) for each in fit.parameters
        },
        "covariance": {
            "parameters": [each.name for each in fit.parameters],
            "matrix": [[float(c) for c in row] for row in fit.covariance],
        },
        "ties": list(fit.ties),
        "misfit": float(fit.misfit),
        "noise": _noise(fit),
        "between_samples": fit.between,
        "sticking": _sticking(fit, rig.command_unit),
        "curve": _curve(fit, rig.command_unit),
    }


def _curve(fit: Fit, unit: str) -> dict[str, Any] | None:
    """A gain that differs along the command u: u + bend (u - reference)^2 drives the plant."""
    if fit.bend is None:
        return None
    bend = {"value": float(fit.bend.bend), "unit": f"1/({unit})", "std_error": float(fit.bend.error)}
    return {
        "reference": {"value": float(fit.bend.reference), "unit": unit},
        "bend": bend,
        "reach": {"value": float(fit.bend.reach), "unit": unit},
    }


def _sticking(fit: Fit, unit: str) -> dict[str, Any] | None:
    """A valve that sticks: within the band the command moves nothing; after a move it rests short of the command."""
    if fit.sticking is None or fit.plausible.valves is None:
        return None
    rows = {}
    for place, name in enumerate(("band", "short")):
        low, middle, high = np.quantile(fit.plausible.valves[:, place], [0.025, 0.5, 0.975])
        rows[name] = {"value": float(middle), "unit": unit, "interval_95": [float(low), float(high)]}
    return rows


def _noise(fit: Fit) -> dict[str, Any]:
    """Of the response, ARMA(1, 1), with the number of samples that it and the plant were found from."""
    samples = sum(int(np.sum(np.isfinite(run.response))) for run in fit.runs)
    return {**{name: float(value) for name, value in asdict(fit.noise).items()}, "samples": samples}


def _parameter(parameter: Parameter, fit: Fit, command_unit: str, response_unit: str) -> dict[str, Any]:
    return {
        "value": float(parameter.value),
        "unit": unit_of(parameter, fit.plant.integrators, command_unit, response_unit),
        "std_error": float(parameter.std_error),
        "interval_95": [float(parameter.low), float(parameter.high)],
    }


def _chosen(outcome: Outcome) -> dict[str, Any] | None:
    """Controller and selection, wherever on the sheet they belong."""
    design, rig = outcome.design, outcome.rig
    if design is None:
        return None
    controller = {
        "structure": design.gains.structure,
        "action": _action(design.gains),
        "forms": forms_as_printed(design.gains, rig.command_unit, rig.response_unit),
        "further_forms": further_forms_as_printed(design.gains, rig),
        "forms_missing": missing_forms(design.gains, rig),
        "setpoint_weight": float(design.gains.setpoint_weight),
        "difference_equation": None if design.continuous else law_row(design.law),
    }
    return {"controller": controller, "selection": _selection(design.selection)}


def _action(gains: Gains) -> str:
    """Reverse: the command falls when the response rises, as it must where the plant's gain is positive."""
    sign = next((each for each in (gains.integral, gains.proportional, gains.derivative) if each != 0.0), 0.0)
    return "reverse" if sign > 0 else "direct"


def _selection(selection: Selection) -> dict[str, Any]:
    return {
        "loop_gain": float(selection.loop_gain),
        "loop_gain_unit": selection.loop_gain_unit,
        "pole": [float(selection.pole.real), float(selection.pole.imag)],
        "sampled_pole": [float(selection.sampled_pole.real), float(selection.sampled_pole.imag)],
        "angle_residual": float(selection.angle_residual_deg),
        "intervals": _intervals(selection.intervals),
        "intervals_plausible": _intervals(selection.intervals_plausible),
        "rows": [{"requirement": name, "intervals": _intervals(found)} for name, found in selection.rows],
    }


def _intervals(intervals: Sequence[GainInterval]) -> list[list[float | None]]:
    return [[bounded(low), bounded(high)] for low, high in intervals]


def _checked(design: Design, confidence: float) -> dict[str, Any]:
    return {
        "plausible_plants": int(design.plants_checked),
        "share_meeting": float(design.share_meeting),
        "confidence": float(confidence),
        "all_stable": bool(design.all_stable),
        "limits_kept": bool(design.limits_kept),
        "clamped_share": float(design.clamped_share),
        "clamped_duration": float(design.clamped_duration),
    }


def _limit(limit: LimitJudged) -> dict[str, Any]:
    return {
        "name": limit.name,
        "limit": bounded(limit.limit),
        "predicted_worst": bounded(limit.predicted_worst),
        "unit": limit.unit,
        "headroom": bounded(limit.headroom),
        "met": bool(limit.met),
    }


def _closing(outcome: Outcome) -> list[dict[str, Any]]:
    held_out = [record for record in outcome.sources if record.spec.use == "held-out"]
    return [_compared(each, record, outcome.rig) for each, record in zip(outcome.closing, held_out, strict=True)]


def _compared(compared: Compared, record: Source, rig: Rig) -> dict[str, Any]:
    return {
        "file": record.spec.shown,
        "window": window_of(record),
        "samples_sha256": record.samples_sha256,
        "loop": record.spec.loop,
        "misfit": bounded(compared.misfit),
        "noise_floor": bounded(compared.noise_floor),
        "coverage_95": float(compared.coverage_95),
        "share_meeting": None if compared.share_meeting is None else float(compared.share_meeting),
        "verdict": compared.verdict,
        "why": compared.why,
        "seen": sight_row(compared.sight, rig.command_unit, rig.response_unit),
    }
