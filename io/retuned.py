"""What a job after a mechanical change knows besides its own results."""

from dataclasses import dataclass

from ..design.old_gains import OldGains
from ..ident.change import Changed
from .earlier import Earlier


@dataclass(frozen=True, eq=False)
class Retuned:
    """What `retune` adds to a job.

    Attributes
    ----------
    earlier : Earlier
    changed : Changed
        Units as printed.
    old : OldGains
    structure : str
        In which both were compared: that of the earlier sheet.
    """

    earlier: Earlier
    changed: Changed
    old: OldGains
    structure: str
