"""The report's section after a mechanical change: parameters, old gains, both loci."""

from typing import Any

from ..figures.gallery import two_loci_picture
from ..figures.svg import inline_svg
from ..figures.words import number, with_unit
from ..outcome import Outcome
from ..retuned import Retuned
from .tables import Table

GUIDE = (
    "How to read it: both loci in one plane. Broken lines and open marks: the earlier plant with the earlier gains. "
    "Full lines and filled marks: the plant as it is now with the new gains. Crosses and rings are the open loop's "
    "poles and zeros, diamonds the closed loop's poles at the gain chosen."
)


def changed_of(outcome: Outcome) -> dict[str, Any] | None:
    """What the page shows of a change; None for a job that no earlier sheet stands beside."""
    found = outcome.retuned
    if found is None:
        return None
    return {
        "verdict": verdict(found),
        "old": f"{found.old.verdict.upper()}: {found.old.why}.",
        "table": table(found),
        "picture": _picture(outcome),
        "guide": GUIDE,
        "trail": f"Compared with {found.earlier.file.name}, sha256 {found.earlier.sha256[:16]}…",
    }


def verdict(found: Retuned) -> str:
    """Whether anything changed, in a sentence with its odds."""
    changed = found.changed
    if changed.p_value is None:
        return f"The structures can't be compared: {found.earlier.known.structure} before, another one now."
    odds = f"p = {number(changed.p_value, 2)} for no change at all, all parameters together"
    names = [row.name for row in changed.parameters if row.changed]
    if not changed.changed:
        return f"No change of the plant is visible ({odds})."
    return f"The plant has changed ({odds}): {', '.join(names) or 'no parameter by itself, all of them together'}."


def table(found: Retuned) -> Table:
    """One row a parameter."""
    rows = tuple(
        (
            row.name,
            with_unit(row.before, row.unit),
            with_unit(row.after, row.unit),
            f"{number(row.difference, 3)} ({number(row.low, 3)} to {number(row.high, 3)})",
            "changed" if row.changed else "no change seen",
        )
        for row in found.changed.parameters
    )
    marked = tuple(i for i, row in enumerate(found.changed.parameters) if row.changed)
    head = ("parameter", "before", "after", "difference (95 %)", "")
    return Table(f"The plant before and after, both as {found.structure}", head, rows, marked)


def _picture(outcome: Outcome) -> str:
    picture = two_loci_picture(outcome)
    return inline_svg(picture.figure, picture.name, picture.title) if picture else ""
