"""What `recheck` says, for people and for programs."""

import math
from collections.abc import Iterator, Sequence
from typing import Any

from ..design.closing.rung import RungRun
from ..ident.trend import Trend
from .figures.words import number, one_line
from .rechecking import Rechecked

_MONTH = 30.0  # days


def sheet_text(found: Rechecked) -> str:
    """Verdict, each run, each trend."""
    return "\n".join(_sheet_lines(found))


def _sheet_lines(found: Rechecked) -> Iterator[str]:
    created = str(found.earlier.sheet.get("provenance", {}).get("created", ""))[:10]
    yield f"{found.verdict.upper()}  {one_line(found.earlier.sheet['rig']['name'])}, sheet of {created}"
    if not found.earlier.released:
        yield "  ! that sheet was held: its gains were never released"
    for day, each in found.compared:
        yield f"  {day.isoformat()}  {one_line(each.label)}: {each.verdict}: {one_line(each.why)}"
    for trend in found.trends:
        yield f"  {trend_text(trend)}"
    if len(found.compared) > 1 and not found.trends:
        yield "  no trend: that needs comparable runs of at least three dates"
    for note in found.notes:
        yield f"  ! {one_line(note)}"


def trend_text(trend: Trend) -> str:
    """How one parameter moves, a month at a time.

    Examples
    --------
    >>> trend_text(Trend("gain", 0.001, 0.0008, 0.0012, 0.001, True))
    'gain: DRIFTING by 3.05 % a month (2.43 to 3.67)'
    """
    ends = [trend.per_day, trend.low, trend.high]
    if trend.name == "dead time":
        shown, unit = [_MONTH * end for end in ends], "s"
    else:
        shown, unit = [100.0 * math.expm1(min(_MONTH * end, 700.0)) for end in ends], "%"
    word = "DRIFTING by" if trend.drifting else "no drift seen,"
    return f"{trend.name}: {word} {number(shown[0], 3)} {unit} a month ({number(shown[1], 3)} to {number(shown[2], 3)})"


def rung_text(number_: int, runs: Sequence[RungRun]) -> str:
    """Climb, repeat or stop, run by run; the gravest first."""
    lines = [f"rung {number_}: {advice_of(runs).upper()}"]
    for run in runs:
        share = 100.0 * (1.0 - run.outside)
        lines.append(f"  {one_line(run.label)}: {run.advice}: {one_line(run.why)} ({number(share, 3)} % in the band)")
    if advice_of(runs) == "stop":
        lines.append(
            "  Go to the rig's own safe state; zero command is not safe for vertical loads, accumulators or heaters."
        )
    return "\n".join(lines)


def advice_of(runs: Sequence[RungRun]) -> str:
    """The gravest of them."""
    advices = [run.advice for run in runs]
    return next(each for each in ("stop", "repeat", "climb") if each in advices)


def sheet_row(found: Rechecked) -> dict[str, Any]:
    """The same as JSON values."""
    return {
        "sheet": {"file": str(found.earlier.file), "sha256": found.earlier.sha256},
        "verdict": found.verdict,
        "runs": [
            {
                "file": each.label,
                "taken": day.isoformat(),
                "verdict": each.verdict,
                "why": each.why,
                "misfit": each.misfit if math.isfinite(each.misfit) else None,
                "share_meeting": each.share_meeting,
            }
            for day, each in found.compared
        ],
        "trends": [
            {
                "name": trend.name,
                "per_day": trend.per_day,
                "interval_95": [trend.low, trend.high],
                "of": "value in s" if trend.name == "dead time" else "natural logarithm",
                "p_value": trend.p_value,
                "drifting": trend.drifting,
            }
            for trend in found.trends
        ],
        "notes": list(found.notes),
    }


def rung_row(number_: int, runs: Sequence[RungRun]) -> dict[str, Any]:
    """A rung's advice as JSON values."""
    rows = [{"file": run.label, "advice": run.advice, "why": run.why, "outside": run.outside} for run in runs]
    return {"rung": number_, "advice": advice_of(runs), "runs": rows}
