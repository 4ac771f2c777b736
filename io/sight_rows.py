"""What is seen of a held-out step, as the sheet prints it: overshoot in per cent, the final value in its own unit."""

from typing import Any

from ..design.closing.sight import Sight, StepSight


def sight_row(seen: StepSight | None, command_unit: str, response_unit: str) -> dict[str, Any] | None:
    """The step and its measures, each predicted and measured with its 95 % interval; None where there was no step."""
    if seen is None:
        return None
    unit = command_unit if seen.moved == "command" else response_unit
    return {
        "moved": seen.moved,
        "at": seen.at,
        "until": seen.until,
        "from": {"value": seen.start, "unit": unit},
        "to": {"value": seen.end, "unit": unit},
        "settling_band": seen.band,
        "measures": [_measure(sight, response_unit) for sight in seen.sights],
    }


def _measure(sight: Sight, response_unit: str) -> dict[str, Any]:
    scale = 100.0 if sight.unit == "1" else 1.0
    unit = {"1": "%", "s": "s"}.get(sight.unit, response_unit)
    return {
        "name": sight.name,
        "unit": unit,
        "predicted": _scaled(sight.predicted, scale),
        "predicted_interval_95": _pair(sight.predicted_interval, scale),
        "measured": _scaled(sight.measured, scale),
        "measured_interval_95": _pair(sight.measured_interval, scale),
    }


def _scaled(value: float | None, scale: float) -> float | None:
    return None if value is None else scale * value


def _pair(interval: tuple[float, float] | None, scale: float) -> list[float] | None:
    return None if interval is None else [scale * end for end in interval]
