"""What changed, in the dossier."""

import h5py

from .dossier_parts import numbers, texts
from .retuned import Retuned


def put_change(group: h5py.Group, found: Retuned) -> None:
    """The table of parameters and the verdict on the old gains."""
    changed, old = found.changed, found.old
    rows = changed.parameters
    group.attrs["changed"] = changed.changed
    group.attrs["compared_as"] = found.structure
    group.attrs["earlier_sheet"] = str(found.earlier.file)
    group.attrs["earlier_sha256"] = found.earlier.sha256
    group.attrs["old_gains"] = old.verdict
    group.attrs["old_gains_share_meeting"] = old.share_meeting
    texts(group, "name", (row.name for row in rows), "order of the rows below")
    texts(group, "unit", (row.unit for row in rows), "of each row")
    for name in ("before", "after", "difference", "low", "high"):
        numbers(group, name, (getattr(row, name) for row in rows), "see unit", f"{name}; low, high: of the difference")
    numbers(group, "p_value", [changed.p_value], "1", "of no change in all parameters jointly; NaN: not comparable")
