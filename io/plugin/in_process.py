"""An acquisition in this process: fed with samples, it buffers, and works on its own thread. No hardware is written."""

import re
import threading
import time
from collections.abc import Callable, Hashable
from dataclasses import dataclass, field
from importlib.metadata import version
from pathlib import Path
from queue import Empty, SimpleQueue
from typing import Any

import numpy as np

from ..write_whole import OutputFolder
from .apart import do_apart, enough_apart
from .enough import Enough
from .folder import content_key
from .guard import Guard
from .jobs import BAD_RECORD, Done, Job, Work

ROLES = ("command", "response", "setpoint")
_PLAIN_NAME = re.compile(r"[^\w.-]+")


@dataclass(eq=False)
class Recording:
    """One run while it is fed; only our own thread touches it.

    Attributes
    ----------
    parts : dict of number to dict
        By column: arrays of one length each. A number that comes again takes the place of the first.
    planned : int or None
        Samples that the run should have.
    """

    name: str
    planned: int | None = None
    parts: dict[Hashable, dict[str, Any]] = field(default_factory=dict)
    looked: float = field(default_factory=time.monotonic)
    enough: bool = False

    @property
    def count(self) -> int:
        """Samples so far."""
        return sum(len(part["time"]) for part in self.parts.values())

    def columns(self) -> dict[str, Any]:
        """Every column from its first to its last sample; one that is missing in any part is left out."""
        parts = list(self.parts.values())
        names = [name for name in ("time", *ROLES) if parts and all(name in part for part in parts)]
        return {name: np.concatenate([part[name] for part in parts]) for name in names}


class InProcess:
    """Feed it with the start, the samples and the end of each run; results come back by callback.

    No method ever raises or waits: whatever goes wrong is kept in `faults`. Everything is done on one own thread, the
    computation in a process of its own. A run is written to ``out/runs/NAME.csv`` and then treated as by
    ``gainwright watch``: as a fresh held-out run of the rig file.

    Parameters
    ----------
    rig_file : Path
    out : Path
        For runs and results: ``out/NAME/gains.json`` and so on.
    on_result : callable or None
        Gets a `Done` for each run, on our thread.
    on_enough : callable or None
        Gets the run's name and an `Enough`, once a run and during it, when its record is enough; on our thread.
    look_every_s : float
        How often a growing record is looked at for that.
    work, look : callable
        What does a job, and what tells whether a record is enough.
    """

    def __init__(
        self,
        rig_file: Path,
        out: Path,
        *,
        on_result: Callable[[Done], None] | None = None,
        on_enough: Callable[[str, Enough], None] | None = None,
        look_every_s: float = 10.0,
        work: Work = do_apart,
        look: Callable[[Path, Path], Enough] = enough_apart,
    ) -> None:
        self._rig_file, self._out = Path(rig_file), Path(out)
        self._on_result, self._on_enough, self._every_s = on_result, on_enough, look_every_s
        self._work, self._look = work, look
        self._guard = Guard()
        self._queue: SimpleQueue[Callable[[], None] | None] = SimpleQueue()
        self._open: dict[Hashable, Recording] = {}
        self._thread = threading.Thread(target=self._serve, name="gainwright", daemon=True)
        self._thread.start()

    @property
    def faults(self) -> tuple[str, ...]:
        """What went wrong inside, as tracebacks, oldest first."""
        return tuple(self._guard.faults)

    def start(self, name: str, *, planned_samples: int | None = None, run: Hashable = "") -> None:
        """A run begins.

        Parameters
        ----------
        name : str
            For people, and for its folder of results.
        planned_samples : int or None
            A run that ends with fewer was stopped early.
        run : hashable
            Tells runs apart that are fed at the same time.
        """
        self.post(lambda: self._open.__setitem__(run, Recording(str(name), planned_samples)))

    def sample(
        self,
        time: Any,
        command: Any,
        response: Any,
        setpoint: Any | None = None,
        *,
        run: Hashable = "",
        number: Hashable = None,
    ) -> None:
        """One sample, or arrays of samples, as the rig's logger would log them.

        Parameters
        ----------
        time : float or (n,) array, s
        command, response, setpoint : float or (n,) array
            In the units of the rig file; its scale and offset are applied.
        run : hashable
        number : hashable
            A sample of a number that was there already takes its place; None is always a new one.
        """
        with self._guard:
            given = {"time": time, "command": command, "response": response, "setpoint": setpoint}
            part = {
                name: np.array(values, dtype=np.float64, ndmin=1)
                for name, values in given.items()
                if values is not None
            }
            self.post(lambda: self._add(run, part, number))

    def end(self, *, complete: bool = True, why: str = "", run: Hashable = "") -> None:
        """The run is over.

        Parameters
        ----------
        complete : bool
            False: it was stopped early, and nothing is tuned from it.
        why : str
        run : hashable
        """
        self.post(lambda: self._end(run, complete, why))

    def post(self, task: Callable[[], None]) -> None:
        """Let our own thread do something, at once when it asks itself; for adapters of other hosts."""
        if threading.current_thread() is self._thread:
            task()
        else:
            self._queue.put(task)

    def close(self, wait_s: float | None = None) -> bool:
        """Let everything that was fed be done, then end the thread.

        Parameters
        ----------
        wait_s : float or None
            How long to wait for that; None waits until it is done.

        Returns
        -------
        bool
            Whether all is done.
        """
        self._queue.put(None)
        self._thread.join(wait_s)
        return not self._thread.is_alive()

    def _serve(self) -> None:
        while True:
            try:
                task = self._queue.get(timeout=self._every_s)
            except Empty:
                task = self._nothing
            if task is None:
                return
            with self._guard:
                task()
            with self._guard:
                self._look_at_all()

    def _nothing(self) -> None:
        """Nothing was fed for a while."""

    def _add(self, run: Hashable, part: dict[str, Any], number: Hashable) -> None:
        lengths = {name: len(values) for name, values in part.items()}
        if len(set(lengths.values())) != 1:
            raise ValueError(f"samples of unequal length: {lengths}")
        parts = self._open[run].parts
        parts[len(parts) if number is None else number] = part

    def _look_at_all(self) -> None:
        """Ask whether a growing record is enough, once it has something to tell."""
        if self._on_enough is None:
            return
        now = time.monotonic()
        for recording in list(self._open.values()):
            if not recording.enough and now - recording.looked >= self._every_s and recording.count >= 50:
                part = self._out / ".gainwright-growing"
                OutputFolder(_made(part)).write({"run.csv": table(recording.columns())})
                found = self._look(self._rig_file, part / "run.csv")
                recording.looked = time.monotonic()
                if found.enough:
                    recording.enough = True
                    self._on_enough(recording.name, found)

    def _end(self, run: Hashable, complete: bool, why: str) -> None:
        recording = self._open.pop(run)
        short = recording.planned is not None and recording.count < recording.planned
        reason = why or (f"{recording.count} of {recording.planned} samples" if short else "its host says so")
        stopped = short or not complete
        name = self._free_name(recording.name)
        shown = f"{name}.stopped.csv" if stopped else f"{name}.csv"
        runs = _made(self._out / "runs")
        if recording.count:
            OutputFolder(runs).write({shown: table(recording.columns())})
        done = self._stopped(name, reason) if stopped or not recording.count else self._done(name, runs / shown)
        if self._on_result is not None:
            self._on_result(done)

    def _stopped(self, name: str, reason: str) -> Done:
        said = f"the run was stopped early, and is not tuned from: {reason}"
        return Done("", name, self._out / name, BAD_RECORD, "stopped early", said)

    def _done(self, name: str, file: Path) -> Done:
        key = content_key([file, self._rig_file], version("gainwright")) or name
        return self._work(Job(key, name, self._rig_file, self._out / name, file, plain=True))

    def _free_name(self, name: str) -> str:
        """The run's name without signs that a file name can't have; numbered when it is taken."""
        plain = _PLAIN_NAME.sub("_", name).strip("._") or "run"
        taken = {file.name.removesuffix(".csv").removesuffix(".stopped") for file in self._out.glob("runs/*.csv")}
        number, free = 1, plain
        while free in taken or free == "runs":
            number += 1
            free = f"{plain}_{number}"
        return free


def table(columns: dict[str, Any]) -> bytes:
    """Columns as text that gives the same numbers back.

    Examples
    --------
    >>> table({"time": np.array([0.0, 0.1]), "command": np.array([1.0, 2.0])})
    b'time,command\\n0.0,1.0\\n0.1,2.0\\n'
    """
    rows = zip(*(values.tolist() for values in columns.values()), strict=True)
    lines = [",".join(columns), *(",".join(map(repr, row)) for row in rows)]
    return ("\n".join(lines) + "\n").encode()


def _made(folder: Path) -> Path:
    folder.mkdir(parents=True, exist_ok=True)
    return folder
