"""A judged requirement as the sheet prints it."""

import math
from typing import Any

from ..design.designed import Judged
from .ladder_rows import bounded


def requirement_row(judged: Judged) -> dict[str, Any]:
    """In the unit the person wrote; an endless margin (no crossing at all) is null and said to be unbounded."""
    requirement = judged.requirement
    values = [judged.predicted, judged.low, judged.high]
    predicted, low, high = (None if value is None else value * requirement.scale for value in values)
    return {
        "name": requirement.name,
        "limit": float(requirement.limit * requirement.scale),
        "predicted": bounded(predicted),
        "interval_95": [bounded(low), bounded(high)],
        "unit": requirement.unit or "1",
        "met": bool(judged.met),
        "asked": not judged.floor,
        "unbounded": requirement.sense == "at_least" and predicted is not None and math.isinf(predicted),
    }
