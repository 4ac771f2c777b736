"""The answers to wished closed-loop poles as the sheet keeps them."""

import math
from typing import Any

from ..design.locus.condition import LocusPoint
from .outcome import Outcome
from .wish import Answer


def wish_rows(outcome: Outcome) -> list[dict[str, Any]]:
    """One row a wish: K and angle residual at the wished point, and the nearest point of the locus.

    Points in 1/s, angles in deg; null: no finite number, or nothing was designed.
    """
    unit = outcome.design.selection.loop_gain_unit if outcome.design else None
    return [_row(answer, unit) for answer in outcome.wishes]


def _row(answer: Answer, unit: str | None) -> dict[str, Any]:
    found = answer.found
    row: dict[str, Any] = {"asked": answer.wish.text, "point": _pair(answer.wish.point), "loop_gain_unit": unit}
    if found is None:
        return {**row, "loop_gain": None, "angle_residual": None, "on_locus": None, "nearest": None}
    return {
        **row,
        "loop_gain": _finite(found.point.loop_gain),
        "angle_residual": _finite(found.point.angle_residual_deg),
        "on_locus": found.on_locus,
        "nearest": {**_nearest(found.nearest), "distance": float(found.distance), "all_hold": answer.holds,
                    "all_hold_plausible": answer.holds_plausible},
    }  # fmt: skip


def _nearest(point: LocusPoint) -> dict[str, Any]:
    return {"point": _pair(point.point), "loop_gain": _finite(point.loop_gain)}


def _pair(s: complex) -> list[float]:
    return [float(s.real), float(s.imag)]


def _finite(value: float) -> float | None:
    return float(value) if math.isfinite(value) else None
