"""One job as a value, the work of it in any process, and the receipt that says it was done whole."""

import json
import time
import traceback
from collections.abc import Callable, Mapping
from concurrent.futures import ThreadPoolExecutor
from dataclasses import asdict, dataclass, field, replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

from ...ident.errors import GainwrightError, RecordError, RequestError
from ..write_whole import RECEIPT, SHEET, OutputFolder
from .guard import Guard
from .journal import FINAL

if TYPE_CHECKING:
    from ..outcome import Outcome
    from ..rigfile.rig import Rig

RELEASED, FAULT, WRONG_CALL, HELD, BAD_RECORD = 0, 1, 2, 3, 4
GRAVEST = (FAULT, WRONG_CALL, BAD_RECORD, HELD, RELEASED)
STATUS = {RELEASED: "released", FAULT: "fault", WRONG_CALL: "wrong call", HELD: "held", BAD_RECORD: "bad log"}


@dataclass(frozen=True)
class Job:
    """One job to do; it can be sent to another process or machine that sees the same files.

    Attributes
    ----------
    key : str
        By content and configuration.
    label : str
        For people.
    rig_file, folder : Path
        Where it comes from, where its results go.
    fresh : Path or None
        A run that has just been completed: it is held out when the rig file doesn't name it.
    left_out : tuple of Path
        Runs that the rig file names and that must not be used: still being written, or stopped early.
    plain : bool
        The fresh run's columns are called time, command, response and setpoint, time in s, the others as the rig logs.
    """

    key: str
    label: str
    rig_file: Path
    folder: Path
    fresh: Path | None = None
    left_out: tuple[Path, ...] = ()
    plain: bool = False
    with_report: bool = True


@dataclass(frozen=True)
class Done:
    """How a job ended.

    Attributes
    ----------
    code : int
        Its exit code.
    status : str
        "released", "held", "stopped early", "bad log", "wrong call", "fault".
    said : str
        The first reasons, or the error, for people.
    plant, controller : str
        In short; empty where there is none.
    seconds : float
    """

    key: str
    label: str
    folder: Path
    code: int
    status: str
    said: str
    plant: str = ""
    controller: str = ""
    seconds: float = field(default=0.0, compare=False)


Work = Callable[[Job], Done]


class StoppedEarlyError(RecordError):
    """A run that was stopped before its end; nothing is tuned from it."""


def gravest(codes: "list[int]") -> int:
    """The gravest exit code of many jobs, 0 for none.

    Examples
    --------
    >>> gravest([0, 3, 4, 0]), gravest([3, 2, 4]), gravest([])
    (4, 2, 0)
    """
    return next((code for code in GRAVEST if code in codes), RELEASED)


def do(job: Job) -> Done:
    """Do a job and write its results; never raises. A job whose receipt is there is not done again.

    Parameters
    ----------
    job : Job
    """
    before = time.monotonic()
    finished = receipt(job.folder, job.key)
    if finished is not None:
        return finished
    with ThreadPoolExecutor(1) as own:  # a future keeps whatever is raised, so that no fault of one job ends the rest
        future = own.submit(_deliver, job)
        fault = future.exception()
    done = future.result() if fault is None else _failed(job, fault)
    return replace(done, seconds=time.monotonic() - before)


def receipt(folder: Path, key: str) -> Done | None:
    """How the job of this key ended, when everything that it wrote is whole; None when it must be done.

    Parameters
    ----------
    folder : Path
    key : str
    """
    try:
        said = json.loads((folder / RECEIPT).read_text("utf-8"))
        done = Done(**{**said, "folder": Path(said["folder"])})
    except (OSError, ValueError, KeyError, TypeError):
        return None
    if done.key != key or done.code not in FINAL:
        return None
    whole = done.code == BAD_RECORD or (folder / SHEET).exists()  # the sheet is put in place last
    return done if whole else None


def receipt_bytes(done: Done) -> bytes:
    """The content of a receipt."""
    return (json.dumps({**asdict(done), "folder": str(done.folder)}, indent=1, ensure_ascii=False) + "\n").encode()


def _deliver(job: Job) -> Done:
    from ..deliver import deliver

    kept: list[Done] = []

    def more(outcome: "Outcome") -> Mapping[str, bytes]:
        kept.append(_of_outcome(job, outcome))
        return {RECEIPT: receipt_bytes(kept[0])}

    deliver(
        job.rig_file,
        job.folder,
        with_report=job.with_report,
        change=lambda rig: _with_fresh(job, rig),
        more=more,
    )
    return kept[0]


def _of_outcome(job: Job, outcome: "Outcome") -> Done:
    from ..figures.words import with_unit

    design = outcome.design
    controller = ""
    if design is not None:
        gain = with_unit(design.selection.loop_gain, design.selection.loop_gain_unit)
        controller = f"{design.gains.structure}, K = {gain}"
    return Done(
        key=job.key,
        label=job.label,
        folder=job.folder,
        code=RELEASED if outcome.status == "released" else HELD,
        status=outcome.status,
        said="; ".join(outcome.reasons[:3]),
        plant=outcome.fit.structure if outcome.fit is not None else "",
        controller=controller,
    )


def _failed(job: Job, fault: BaseException) -> Done:
    """The record of a failure, also written as the job's receipt where that can be."""
    code = FAULT
    if isinstance(fault, RequestError):
        code = WRONG_CALL
    elif isinstance(fault, RecordError):
        code = BAD_RECORD
    said = fault.text if isinstance(fault, GainwrightError) else fault_line(fault)
    status = "stopped early" if isinstance(fault, StoppedEarlyError) else STATUS[code]
    done = Done(job.key, job.label, job.folder, code, status, said)
    if job.rig_file.is_file():  # a mistyped name leaves no folder behind
        with Guard(), OutputFolder(job.folder, patience_s=5.0) as output:
            output.write({RECEIPT: receipt_bytes(done)})
    return done


def fault_line(fault: BaseException) -> str:
    """What broke and where, in one line."""
    places = traceback.extract_tb(fault.__traceback__)
    where = f" ({Path(places[-1].filename).name}, line {places[-1].lineno})" if places else ""
    return f"{type(fault).__name__}: {fault}{where}"


def _with_fresh(job: Job, rig: "Rig") -> "Rig":
    """The rig with the fresh run among its runs, and without those that must be left out.

    Raises
    ------
    StoppedEarlyError
        When the fresh run was stopped early.
    RequestError
        When no run to fit is left.
    """
    from ..rigfile.rig import RunSpec
    from .stopped_early import refuse_stopped_early

    runs = tuple(spec for spec in rig.runs if spec.file not in job.left_out)
    if job.fresh is not None:
        fresh = job.fresh.resolve()
        if all(spec.file != fresh for spec in runs):
            signals = plain_signals(rig) if job.plain else rig.signals
            runs = (*runs, RunSpec(fresh, job.label, "held-out", "open", "auto", "auto", signals))
        for spec in runs:
            if spec.file == fresh:
                refuse_stopped_early(spec, rig)
    if rig.runs and not any(spec.use == "fit" for spec in runs) and any(spec.use == "fit" for spec in rig.runs):
        raise RequestError(
            "no run to fit is complete yet",
            where=str(rig.file),
            found=", ".join(str(file) for file in job.left_out),
            expected='a complete run with use = "fit"',
            advice="wait for one, or name one that is there",
        )
    return replace(rig, runs=runs)


def plain_signals(rig: "Rig") -> dict[str, Any]:
    """The rig's signals under the plain names, in the units in which the rig logs them."""
    from ..rigfile.rig import Signal

    plain: dict[str, Any] = {"time": Signal("time", "s")}
    for role in ("command", "response", "setpoint"):
        if role in rig.signals:
            unit = rig.command_unit if role == "command" else rig.response_unit
            plain[role] = replace(rig.signals[role], source=role, unit=rig.signals[role].unit or unit)
    return plain
