"""A folder in which runs appear: what is there, and what is complete. Nothing in it is ever locked or changed."""

import hashlib
import os
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from fnmatch import fnmatch
from pathlib import Path
from time import monotonic

from ...ident.errors import RecordError
from ..readers.port import Hints
from ..readers.registry import reader_of, readers
from ..readers.through_child import MissingLibraryError

UNFINISHED_SUFFIXES = (".part", ".partial", ".tmp", ".temp", ".crdownload", ".filepart", ".swp", ".lock", "~")
PATIENCE = 10.0  # times the quiet time: a file that never looks finished is taken as it is
_TAIL = 65536


@dataclass(frozen=True)
class State:
    """A file as seen at one time: size in bytes, time of change in ns, and the file itself."""

    size: int
    changed: int
    node: int


@dataclass(frozen=True)
class Seen:
    """Since when a file is as it is, s of the monotonic clock."""

    state: State
    since: float


class Folder:
    """Knows which runs of a folder are complete, by looking again and again.

    A file is complete when it has kept its size and time of change for the quiet time and looks finished: text ends
    with a line end, any other format opens. One that is quiet for ten times as long and still doesn't look finished is
    taken as it is: its logger may have died. Clocks of other machines are never compared with ours.

    Parameters
    ----------
    folder : Path
    pattern : str or None
        Of the names, such as "*.csv"; None takes every file with a suffix that a reader knows.
    quiet_s : float
    but : sequence of Path
        Files and folders to leave out: results, the rig file.
    clock : callable
        Seconds, for tests.
    """

    def __init__(
        self,
        folder: Path,
        *,
        pattern: str | None = None,
        quiet_s: float = 3.0,
        but: Sequence[Path] = (),
        clock: Callable[[], float] = monotonic,
    ) -> None:
        self.folder = folder.resolve()
        self.quiet_s = quiet_s
        self._pattern = pattern
        self._but = {path.resolve() for path in but}
        self._clock = clock
        self._seen: dict[Path, Seen] = {}
        self._asked: dict[Path, tuple[State, bool, float]] = {}
        self._suffixes = {suffix for reader in readers() for suffix in reader.suffixes}

    def look(self) -> tuple[list[Path], list[Path]]:
        """Scan the whole folder.

        Returns
        -------
        complete, unfinished : lists of Path
            Both sorted by name.
        """
        now = self._clock()
        states = dict(self._states())
        self._seen = {
            file: old if (old := self._seen.get(file)) is not None and old.state == state else Seen(state, now)
            for file, state in states.items()
        }
        complete = [file for file in sorted(states) if self._is_complete(file, now)]
        return complete, [file for file in sorted(states) if file not in complete]

    def state(self, file: Path) -> State | None:
        """The file as it was at the last look."""
        seen = self._seen.get(file)
        return None if seen is None else seen.state

    def _is_complete(self, file: Path, now: float) -> bool:
        seen = self._seen[file]
        quiet = now - seen.since
        if quiet < self.quiet_s:
            return False
        return quiet >= PATIENCE * self.quiet_s or self._looks_finished(file, seen.state, now)

    def _looks_finished(self, file: Path, state: State, now: float) -> bool:
        """Asked once a state; one that doesn't look finished is asked again after the quiet time."""
        asked = self._asked.get(file)
        if asked is None or asked[0] != state or (not asked[1] and now - asked[2] >= self.quiet_s):
            asked = (state, state.size > 0 and looks_finished(file), now)
            self._asked[file] = asked
        return asked[1]

    def _states(self) -> Iterator[tuple[Path, State]]:
        for base, folders, names in os.walk(self.folder):
            here = Path(base)
            folders[:] = [name for name in folders if not name.startswith(".") and here / name not in self._but]
            for name in names:
                file = here / name
                if self._is_run(name) and file not in self._but:
                    state = state_of(file)
                    if state is not None:
                        yield file, state

    def _is_run(self, name: str) -> bool:
        if name.startswith((".", "~")) or name.lower().endswith(UNFINISHED_SUFFIXES):
            return False
        if self._pattern is not None:
            return fnmatch(name, self._pattern)
        return Path(name).suffix.lower() in self._suffixes


def state_of(file: Path) -> State | None:
    """Size and time of change; None when it is gone or no plain file."""
    try:
        found = file.stat()
    except OSError:
        return None
    return State(found.st_size, found.st_mtime_ns, found.st_ino) if file.is_file() else None


def looks_finished(file: Path) -> bool:
    """Whether a quiet file has an end: a line end in text, an open that succeeds in any other format.

    A file whose library is not installed is taken as finished, so that its job says which extra is missing.

    Parameters
    ----------
    file : Path
    """
    try:
        reader = reader_of(file)
        if ".csv" in reader.suffixes:
            return _tail(file).rstrip(b"\x00\x1a").endswith((b"\n", b"\r"))
        return bool(reader.channels(file, Hints()))
    except MissingLibraryError:
        return True
    except (RecordError, OSError):
        return False


def content_key(files: Sequence[Path], *texts: str) -> str | None:
    """sha256 over the bytes of files and over texts; None when a file is gone or changed while it was read.

    Parameters
    ----------
    files : sequence of Path
    *texts : str
        Version and configuration.
    """
    digest = hashlib.sha256()
    for text in texts:
        digest.update(text.encode() + b"\x00")
    for file in files:
        before = state_of(file)
        try:
            with file.open("rb") as log:
                digest.update(hashlib.file_digest(log, "sha256").digest())
        except OSError:
            return None
        if before is None or state_of(file) != before:
            return None
    return digest.hexdigest()


def _tail(file: Path) -> bytes:
    with file.open("rb") as log:
        log.seek(0, os.SEEK_END)
        log.seek(max(0, log.tell() - _TAIL))
        return log.read()
