"""One record as read: the run and the trail back to its bytes."""

import hashlib
from dataclasses import dataclass
from pathlib import Path

from ..ident.health.fingerprint import Marks
from ..ident.run import Run
from ..ident.tables import Table
from .rigfile.rig import RunSpec


@dataclass(frozen=True)
class Finding:
    """Something seen in a record.

    Attributes
    ----------
    kind : str
        "clipping", "gap", "dead response", "idle command", ... in words.
    where : str
        Place, with unit: "4.2 s to 4.9 s", "line 812".
    size : str
        How much, with unit.
    action : str
        What was done, or what must be done.
    refuses : {"no", "holds", "stops"}
        "no": mended or harmless, and said. "holds": the sheet is held. "stops": the record can't be used (exit 4).
    """

    kind: str
    where: str
    size: str
    action: str
    refuses: str = "no"

    @property
    def text(self) -> str:
        """One line for people."""
        return f"{self.kind} ({self.where}; {self.size}): {self.action}"


@dataclass(frozen=True, eq=False)
class Record:
    """A run as read, with what is needed to find the bytes again.

    Attributes
    ----------
    spec : RunSpec
    run : Run
    sha256 : str
        Of the file's bytes.
    samples_sha256 : str
        Of the samples used (time, command, response as float64 in the units of the log), so that one record under two
        names is found.
    findings : tuple of Finding
    marks : (m,) array or None
        Of a long record that was read by blocks: the fingerprint of all its samples.
    """

    spec: RunSpec
    run: Run
    sha256: str
    samples_sha256: str
    findings: tuple[Finding, ...]
    marks: Marks | None = None


@dataclass(frozen=True, eq=False)
class TableRecord:
    """A frequency table as read, with what is needed to find the bytes again.

    Attributes
    ----------
    spec : RunSpec
        Its signals are the table's columns.
    table : Table
    sha256 : str
        Of the file's bytes.
    samples_sha256 : str
        Of the points as given.
    findings : tuple of Finding
    """

    spec: RunSpec
    table: Table
    sha256: str
    samples_sha256: str
    findings: tuple[Finding, ...]


Source = Record | TableRecord


def sha256_of(file: Path) -> str:
    """Of a file's bytes."""
    with file.open("rb") as log:
        return hashlib.file_digest(log, "sha256").hexdigest()
