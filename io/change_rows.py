"""What `retune` found, as the sheet prints it."""

import math
from typing import Any

from .requirement_row import requirement_row
from .retuned import Retuned


def change_row(retuned: Retuned | None) -> dict[str, Any] | None:
    """The sheet's `change`; null where no earlier sheet was given."""
    if retuned is None:
        return None
    changed, old = retuned.changed, retuned.old
    return {
        "parameters": [
            {
                "name": row.name,
                "unit": row.unit,
                "before": row.before,
                "after": row.after,
                "difference": row.difference,
                "interval_95": [_finite(row.low), _finite(row.high)],
                "changed": bool(row.changed),
            }
            for row in changed.parameters
        ],
        "changed": bool(changed.changed),
        "p_value": changed.p_value,
        "compared_as": retuned.structure,
        "old_gains": {
            "share_meeting": float(old.share_meeting),
            "all_stable": bool(old.all_stable),
            "limits_kept": bool(old.limits_kept),
            "plausible_plants": int(old.plants_checked),
            "requirements": [requirement_row(each) for each in old.judged],
            "verdict": old.verdict,
            "why": old.why,
        },
    }


def _finite(value: float) -> float | None:
    return float(value) if math.isfinite(value) else None
