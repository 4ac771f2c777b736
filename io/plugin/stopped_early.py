"""Whether a run ended before it should have; what its host says about its success doesn't matter."""

from pathlib import Path
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from ..rigfile.rig import Rig, RunSpec

_KINDS = ("zero bytes", "zeros at the end", "channels of unequal length", "early end")
_TAIL_BYTES = 65536
_SEPARATORS = ",;\t|"


def refuse_stopped_early(spec: "RunSpec", rig: "Rig") -> None:
    """Read a run and refuse it when it bears the marks of a stop: cut file, missing window, step without response.

    Parameters
    ----------
    spec : RunSpec
    rig : Rig

    Raises
    ------
    StoppedEarlyError
    RecordError, RequestError
        As when the run is read in a job.
    """
    from ..read_record import read_record
    from .jobs import StoppedEarlyError

    record = read_record(spec, rig)
    marks = [f"{each.kind}: {each.size}" for each in record.findings if each.kind in _KINDS]
    if cut_in_a_row(spec.file):
        marks.append("the last row of the log is cut")
    interval = float(record.run.time[1] - record.run.time[0])
    lasts = (spec.from_s or 0.0) + float(record.run.time[-1])
    if spec.to_s is not None and lasts < spec.to_s - 1.5 * interval:
        marks.append(f"it ends at {lasts:.6g} s, and the rig file takes it to {spec.to_s:g} s")
    if marks:
        raise StoppedEarlyError(
            "this run was stopped early, and is not tuned from",
            where=spec.shown,
            found="; ".join(marks),
            expected="a run that was logged to its end",
            advice="repeat the run; to use what there is, say so in the rig file with from and to",
        )


def cut_in_a_row(file: Path) -> bool:
    """Whether a text log ends inside a row: no line end, and fewer fields than the row before.

    Parameters
    ----------
    file : Path
    """
    with file.open("rb") as log:
        log.seek(0, 2)
        log.seek(max(0, log.tell() - _TAIL_BYTES))
        tail = log.read()
    if not tail or tail.endswith((b"\n", b"\r")) or b"\x00" in tail:
        return False
    lines = tail.decode("utf-8", "replace").splitlines()[-2:]
    return len(lines) == 2 and any(lines[0].count(sign) != lines[1].count(sign) for sign in _SEPARATORS)
