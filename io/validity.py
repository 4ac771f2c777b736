"""For what a sheet holds: the readings that its logs covered, its operating point, the step checked, the date."""

from dataclasses import dataclass

import numpy as np

from .outcome import Outcome

Span = tuple[float, float]


@dataclass(frozen=True)
class Validity:
    """Ranges of validity.

    Attributes
    ----------
    command, response : (lowest, highest) or None
        Readings of the fitted logs; None for a plant that was given.
    operating_command, operating_response : float or None
    test_step : float or None, response unit
    fastest : float or None, rad/s
        Half the sample rate of the slowest log, or the highest frequency of a table: nothing faster was seen.
    made : str
        ISO date.
    taken : tuple of str
        Dates of the fitted logs, where the rig file states them.
    """

    command: Span | None
    response: Span | None
    operating_command: float | None
    operating_response: float | None
    test_step: float | None
    fastest: float | None
    made: str
    taken: tuple[str, ...]


def validity_of(outcome: Outcome) -> Validity:
    """Read off a finished job."""
    records = [record for record in outcome.records if record.spec.use == "fit"]
    fit = outcome.fit
    tables = [source.table for source in outcome.tables if source.spec.use == "fit"]
    steps = [float(np.median(np.diff(record.run.time))) for record in records if record.run.time.size > 1]
    return Validity(
        _span([record.run.command for record in records]),
        _span([record.run.response for record in records]),
        fit.operating_command if fit else None,
        fit.operating_response if fit else None,
        outcome.rig.requirements.test_step,
        min([*(np.pi / step for step in steps), *(table.span[1] for table in tables)], default=None),
        str(outcome.provenance.get("created", ""))[:10],
        tuple(sorted({record.spec.taken for record in records if record.spec.taken})),
    )


def validity_row(outcome: Outcome) -> dict[str, object]:
    """As the sheet prints it."""
    found, rig = validity_of(outcome), outcome.rig
    return {
        "command": {"range": _ends(found.command), "unit": rig.command_unit},
        "response": {"range": _ends(found.response), "unit": rig.response_unit},
        "test_step": {"value": found.test_step, "unit": rig.response_unit},
        "fastest_seen": {"value": found.fastest, "unit": "rad/s"},
        "made": found.made,
        "logs_taken": list(found.taken),
        "until": "the rig is changed mechanically, or a recheck says otherwise",
    }


def _ends(span: Span | None) -> list[float] | None:
    return None if span is None else [float(end) for end in span]


def _span(parts: list[np.ndarray]) -> Span | None:
    known = [part[np.isfinite(part)] for part in parts]
    known = [part for part in known if part.size]
    if not known:
        return None
    return float(min(part.min() for part in known)), float(max(part.max() for part in known))
