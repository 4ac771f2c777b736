"""Watch a folder: each completed run is done once, by its content and the rig file's."""

import threading
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from importlib.metadata import version
from pathlib import Path

from ...ident.errors import RequestError
from .folder import Folder, content_key
from .jobs import Done, Job, Work, do, receipt
from .journal import Journal
from .many import process_pool, run_jobs

Tell = Callable[[str], None]


@dataclass(frozen=True)
class Watch:
    """What to watch and how.

    Attributes
    ----------
    folder, rig_file, out : Path
        `out` gets one folder a run, and the journal.
    pattern : str or None
        Of the names of runs.
    quiet_s : float
        How long a file must stay as it is.
    every_s : float
        Between two full scans.
    once : bool
        End when everything that is there has been done.
    """

    folder: Path
    rig_file: Path
    out: Path
    pattern: str | None = None
    quiet_s: float = 3.0
    every_s: float = 1.0
    once: bool = False
    with_report: bool = True


def watch(asked: Watch, tell: Tell, ended: Callable[[Done], None], stop: threading.Event, work: Work = do) -> list[int]:
    """Watch until `stop` is set, or with `once` until all is done.

    Parameters
    ----------
    asked : Watch
    tell : callable
        Gets lines for people.
    ended : callable
        Gets each job as it ends.
    stop : Event
    work : callable
        What does a job.

    Returns
    -------
    list of int
        The exit code of every run that is there, those of earlier watches of this folder among them.

    Raises
    ------
    RequestError
        When the folder isn't there, or another watch holds `out`.
    """
    if not asked.folder.is_dir():
        raise RequestError("there is no such folder to watch", where=str(asked.folder), expected="a folder of runs")
    with Journal(asked.out) as journal:
        watcher = Watcher(asked, journal, tell, stop)
        for done in run_jobs(watcher.jobs(), journal, lambda: process_pool(1), at_once=1, work=work):
            watcher.codes[done.key] = done.code
            ended(done)
    return list(watcher.codes.values())


class Watcher:
    """Finds the next job, however long it takes.

    Attributes
    ----------
    codes : dict of key to int
        Exit code of every run that is known.
    """

    def __init__(self, asked: Watch, journal: Journal, tell: Tell, stop: threading.Event) -> None:
        self.codes: dict[str, int] = {}
        self._asked, self._journal, self._tell, self._stop = asked, journal, tell, stop
        self._files = Folder(
            asked.folder, pattern=asked.pattern, quiet_s=asked.quiet_s, but=(asked.out, asked.rig_file)
        )
        self._known: dict[Path, object] = {}

    def jobs(self) -> Iterator[Job]:
        """The jobs as their runs become complete, until the stop."""
        while not self._stop.is_set():
            complete, unfinished = self._files.look()
            job = self._next(complete, unfinished)
            if job is not None:
                yield job
            elif self._asked.once and not unfinished:
                return
            else:
                _pause(self._asked.folder, self._asked.every_s, self._stop)

    def _next(self, complete: list[Path], unfinished: list[Path]) -> Job | None:
        """The first complete run that has not been done."""
        for file in complete:
            now = (self._files.state(file), _bytes(self._asked.rig_file))
            if self._known.get(file) == now:
                continue
            key = content_key([file, self._asked.rig_file], version("gainwright"))
            if key is None:
                continue  # it changed while it was read, or it is gone: the next scan tells
            self._known[file] = now
            if not self._was_done(key, file):
                return self._job(key, file, unfinished)
        return None

    def _was_done(self, key: str, file: Path) -> bool:
        """Known to the journal, or done whole by a watch that was killed before it could say so."""
        if key in self.codes:
            return True
        entry = self._journal.done(key)
        if entry is None:
            found = receipt(self._out_of(file), key)
            if found is None:
                return False
            self._journal.adopt(key, found.label, found.folder, found.code, found.status, found.said)
            self.codes[key] = found.code
            return True
        self.codes[key] = int(entry.code or 0)
        return True

    def _job(self, key: str, file: Path, unfinished: list[Path]) -> Job:
        label = file.relative_to(self._files.folder).as_posix()
        last = {entry.label: entry.status for entry in self._journal.entries()}
        stopped = [each for each, status in last.items() if status == "stopped early" and each != label]
        left_out = [*unfinished, *(self._files.folder / each for each in stopped)]
        self._tell(f"{label}: complete")
        return Job(
            key,
            label,
            self._asked.rig_file,
            self._out_of(file),
            file,
            tuple(left_out),
            with_report=self._asked.with_report,
        )

    def _out_of(self, file: Path) -> Path:
        return self._asked.out / file.relative_to(self._files.folder)


def _bytes(file: Path) -> bytes:
    try:
        return file.read_bytes()
    except OSError:
        return b""


def _pause(folder: Path, seconds: float, stop: threading.Event) -> None:
    """Wait for the next scan; with watchfiles installed, file events end the wait early. They are only a hint."""
    try:
        from watchfiles import watch as events
    except ImportError:
        stop.wait(seconds)
        return
    try:
        next(
            events(folder, stop_event=stop, rust_timeout=int(1000 * seconds), yield_on_timeout=True, debounce=100), None
        )
    except OSError:  # a share that can't be watched, a folder that is gone for a moment
        stop.wait(seconds)
