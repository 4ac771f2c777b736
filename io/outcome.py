"""What a whole job returns: every value behind the sheet, nothing written yet."""

from dataclasses import dataclass, field
from typing import Any, Literal

from ..design.closing.compared import Compared
from ..design.designed import Design
from ..design.ladder.rung import Ladder
from ..ident.fitted import Fit
from .record import Record, Source, TableRecord
from .retuned import Retuned
from .rigfile.rig import Rig
from .wish import Answer


@dataclass(frozen=True, eq=False)
class Outcome:
    """A finished job.

    Attributes
    ----------
    status : {"released", "held"}
    reasons, cautions : tuple of str
    design : Design or None
        None when the job ended before a design (no plausible plant, no requirement that can be judged).
    closing : tuple of Compared
    provenance : dict
        Ready for the sheet.
    ladder : Ladder or None
        None where the gains are not stable on every plausible plant.
    retuned : Retuned or None
        What an earlier sheet says beside this job.
    tables : tuple of TableRecord
        Frequency tables.
    wishes : tuple of Answer
        Closed-loop poles that were wished for, with what the locus says.
    """

    rig: Rig
    records: tuple[Record, ...]
    fit: Fit | None
    design: Design | None
    closing: tuple[Compared, ...]
    status: Literal["released", "held"]
    reasons: tuple[str, ...]
    cautions: tuple[str, ...]
    provenance: dict[str, Any] = field(default_factory=dict)
    ladder: Ladder | None = None
    retuned: Retuned | None = None
    tables: tuple[TableRecord, ...] = ()
    wishes: tuple[Answer, ...] = ()

    @property
    def sources(self) -> tuple[Source, ...]:
        """Logs and frequency tables; `closing` has the held-out ones among them in this order."""
        return (*self.records, *self.tables)
