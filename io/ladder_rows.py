"""The gain ladder as the sheet prints it: one entry a rung, with what to expect and when to abort."""

import math
from typing import Any

import numpy as np

from ..design.ladder.rung import RESPONSE_TIMES, SWINGS, Band, Expected, FirstMove, Ladder, Rung, Spread
from ..ident.law import Law
from .forms_as_printed import forms_as_printed
from .rigfile.rig import Rig

SAFE_STATE = (
    "go to the rig's own safe state and keep people away; zero command is not safe for vertical loads, accumulators or "
    "heaters"
)
_TIMES = 25  # of the band on the sheet; the dossier has all
_NOISES = 6.0


def ladder_rows(ladder: Ladder | None, rig: Rig) -> list[dict[str, Any]]:
    """Every rung from 0 on; empty where there is no ladder.

    Parameters
    ----------
    ladder : Ladder or None
    rig : Rig
        For units and limits.
    """
    if ladder is None or ladder.refusal:
        return []
    opening = [_opening(ladder.first_move, rig)] if ladder.first_move is not None else []
    return [*opening, *(_rung(rung, ladder, rig) for rung in ladder.rungs)]


def law_row(law: Law) -> dict[str, Any]:
    """A difference equation with its clamp, as the sheet prints it."""
    clamp = law.clamp
    return {
        "update_interval": float(law.update_interval),
        "command": [float(c) for c in law.command],
        "setpoint": [float(c) for c in law.setpoint],
        "response": [float(c) for c in law.response],
        "memory": [float(c) for c in law.memory],
        "clamp": {"lowest": bounded(clamp.lowest), "highest": bounded(clamp.highest), "rate": bounded(clamp.rate)},
    }


def bounded(value: float | None) -> float | None:
    """None for a bound that is not there; NaN stays, to be refused."""
    return None if value is None or math.isinf(value) else float(value)


def _opening(move: FirstMove, rig: Rig) -> dict[str, Any]:
    """Rung 0: the loop is open."""
    way = "up" if move.up else "down"
    return {
        "rung": 0,
        "loop": "open",
        "forms": None,
        "expected": {
            "command_from": {"value": float(move.command_from), "unit": rig.command_unit},
            "command_to": {"value": float(move.command_to), "unit": rig.command_unit},
            "response_from": {"value": float(move.response_from), "unit": rig.response_unit},
            "response_moves": _spread(move.moves, rig.response_unit),
            "direction": way,
            "within": {"value": float(move.within), "unit": "s"},
            "then": "move the command back",
            "band_99_9": _band(move.band, rig.response_unit),
        },
        "abort": {
            "limits": _limits(rig),
            "moved_less_than": {"value": float(move.at_least), "unit": rig.response_unit, "within": float(move.within)},
            "wrong_way": f"the response must go {way}",
            "because": "otherwise wiring, sign or unit is wrong",
            "then": SAFE_STATE,
        },
        "lowest_gain_margin": None,
    }


def _rung(rung: Rung, ladder: Ladder, rig: Rig) -> dict[str, Any]:
    return {
        "rung": int(rung.number),
        "loop": "closed",
        "structure": rung.gains.structure,
        "share_of_target_gain": float(rung.share),
        "forms": forms_as_printed(rung.gains, rig.command_unit, rig.response_unit),
        "setpoint_weight": float(rung.gains.setpoint_weight),
        "difference_equation": None if rig.setting.update_interval <= 0.0 else law_row(rung.law),
        "expected": _expected(rung.expected, rig),
        "abort": _abort(rung.expected, ladder, rig),
        "lowest_gain_margin": bounded(rung.gain_margin),
        "lowest_gain_margin_unit": "dB",
        "lowest_phase_margin": bounded(rung.phase_margin),
        "lowest_phase_margin_unit": "deg",
        "highest_peak_sensitivity": bounded(rung.sensitivity),
        "plausible_plants": int(rung.plants_checked),
    }


def _expected(expected: Expected | None, rig: Rig) -> dict[str, Any]:
    if expected is None:
        return {}
    unit = rig.response_unit
    return {
        "setpoint_from": {"value": float(expected.setpoint_from), "unit": unit},
        "setpoint_to": {"value": float(expected.setpoint_to), "unit": unit},
        "peak": _spread(expected.peak, unit),
        "final": _spread(expected.final, unit),
        "overshoot": _spread(expected.overshoot, "%", 100.0),
        "rise_time": _spread(expected.rise_time, "s"),
        "settling_time": _spread(expected.settling_time, "s"),
        "command": _spread(expected.command, rig.command_unit),
        "response_time": {"value": float(expected.response_time), "unit": "s"},
        "band_99_9": _band(expected.band, unit),
    }


def _abort(expected: Expected | None, ladder: Ladder, rig: Rig) -> dict[str, Any]:
    patience = None if expected is None else RESPONSE_TIMES * expected.response_time
    visible = _NOISES * ladder.noise_std
    return {
        "limits": _limits(rig),
        "outside_band_99_9_for": {"value": patience, "unit": "s"},
        "growing_oscillation": {"swings": SWINGS, "larger_than": float(visible), "unit": rig.response_unit},
        "frozen_response": {"moves_less_than": float(visible), "unit": rig.response_unit, "for": patience},
        "then": SAFE_STATE,
    }


def _limits(rig: Rig) -> dict[str, Any]:
    """The limits that were given and are bounded."""
    units = {"command": rig.command_unit, "response": rig.response_unit}
    found = {}
    for name, value in vars(rig.limits).items():
        quantity, side = name.split("_")
        if value is not None and math.isfinite(value):
            unit = units[quantity]
            found[f"{quantity} {side}"] = {"value": float(value), "unit": f"{unit}/s" if side == "rate" else unit}
    return found


def _spread(spread: Spread, unit: str, scale: float = 1.0) -> dict[str, Any]:
    """Predicted with its 95 % over the plausible plants; null: never."""
    ends = (None if end is None else float(end * scale) for end in (spread.predicted, spread.low, spread.high))
    predicted, low, high = ends
    return {"predicted": predicted, "interval_95": [low, high], "unit": unit}


def _band(band: Band, unit: str) -> dict[str, Any]:
    rows = np.unique(np.linspace(0, band.time.size - 1, min(band.time.size, _TIMES)).astype(int))
    return {
        "time": [float(t) for t in band.time[rows]],
        "predicted": [float(y) for y in band.response[rows]],
        "low": [float(y) for y in band.low[rows]],
        "high": [float(y) for y in band.high[rows]],
        "unit": unit,
    }
