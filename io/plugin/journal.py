"""What has been done: one line a job, in an SQLite file that survives being killed."""

import os
import sqlite3
import time
from dataclasses import dataclass
from pathlib import Path
from types import TracebackType
from typing import Any, Self

from ...ident.errors import RequestError

FILE = "journal.sqlite"
FINAL = (0, 3, 4)  # a wrong rig file or a fault of the program is tried again at the next start
_TABLE = """
create table if not exists jobs (
    key text primary key, label text not null, folder text not null, begun real not null, ended real,
    attempts integer not null, code integer, status text, said text
)
"""


@dataclass(frozen=True)
class Entry:
    """One job in the journal.

    Attributes
    ----------
    key : str
        sha256 over the bytes of the logs, of the rig file, and the version of the program.
    code : int or None
        Exit code; None while it runs, or when it was killed.
    """

    key: str
    label: str
    folder: str
    attempts: int
    code: int | None
    status: str
    said: str


class Journal:
    """The journal of one output folder. Only one program at a time may hold it.

    Parameters
    ----------
    folder : Path
        Made when it is missing; on a local disk, since the journal is written ahead (WAL).

    Raises
    ------
    RequestError
        On entering, when the folder can't be written to or another program holds the journal.
    """

    def __init__(self, folder: Path) -> None:
        self.path = folder / FILE
        self._lock: int | None = None
        self._base: sqlite3.Connection | None = None

    def __enter__(self) -> Self:
        try:
            self.path.parent.mkdir(parents=True, exist_ok=True)
            self._lock = _hold(self.path.with_suffix(".lock"))
            self._base = sqlite3.connect(self.path, isolation_level=None, timeout=30.0)
            self._base.execute("pragma journal_mode = wal")
            self._base.execute("pragma synchronous = full")
            self._base.execute(_TABLE)
        except (OSError, sqlite3.Error) as cause:
            self._close()
            raise self._refusal(cause) from cause
        return self

    def __exit__(
        self, kind: type[BaseException] | None, value: BaseException | None, trace: TracebackType | None
    ) -> None:
        self._close()

    def begin(self, key: str, label: str, folder: Path) -> int:
        """Note that a job begins; returns which attempt this is, from 1."""
        self._run(
            "insert into jobs (key, label, folder, begun, attempts) values (?, ?, ?, ?, 1) on conflict (key) do update "
            "set label = excluded.label, folder = excluded.folder, begun = excluded.begun, attempts = attempts + 1, "
            "ended = null, code = null",
            (key, label, str(folder), time.time()),
        )
        return int(self._run("select attempts from jobs where key = ?", (key,))[0][0])

    def end(self, key: str, code: int, status: str, said: str) -> None:
        """Note how a job ended."""
        self._run(
            "update jobs set ended = ?, code = ?, status = ?, said = ? where key = ?",
            (time.time(), code, status, said, key),
        )

    def adopt(self, key: str, label: str, folder: Path, code: int, status: str, said: str) -> None:
        """Note a job that was done whole by a program that was killed before it could note so."""
        if self.done(key) is None:
            self.begin(key, label, folder)
            self.end(key, code, status, said)

    def find(self, key: str) -> Entry | None:
        """The job of this key."""
        found = self._entries("where key = ?", (key,))
        return found[0] if found else None

    def done(self, key: str) -> Entry | None:
        """The job of this key, when it ended for good."""
        entry = self.find(key)
        return entry if entry is not None and entry.code in FINAL else None

    def entries(self) -> tuple[Entry, ...]:
        """Every job, in the order in which they first began."""
        return self._entries("")

    def _entries(self, which: str, values: tuple[object, ...] = ()) -> tuple[Entry, ...]:
        words = f"select key, label, folder, attempts, code, status, said from jobs {which} order by rowid"
        rows = self._run(words, values)
        return tuple(
            Entry(key, label, folder, attempts, code, status or "", said or "")
            for key, label, folder, attempts, code, status, said in rows
        )

    def _run(self, words: str, values: tuple[object, ...] = ()) -> list[tuple[Any, ...]]:
        assert self._base is not None, "enter the journal first"
        try:
            return self._base.execute(words, values).fetchall()
        except sqlite3.Error as cause:  # a full disk, a folder that went away
            raise self._refusal(cause) from cause

    def _refusal(self, cause: Exception) -> RequestError:
        return RequestError(
            "the journal can't be kept here",
            where=str(self.path),
            found=str(cause),
            expected="a folder on a local disk that this user may write to, with free space",
            advice="name another folder with --out, or free the space; what is done stays done",
        )

    def _close(self) -> None:
        if self._base is not None:
            self._base.close()
            self._base = None
        if self._lock is not None:
            os.close(self._lock)
            self._lock = None


def _hold(path: Path) -> int:
    """Lock a file beside the journal; the operating system frees it however the program dies."""
    handle = os.open(path, os.O_RDWR | os.O_CREAT, 0o644)
    try:
        if os.name == "posix":
            import fcntl

            fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
        else:
            import msvcrt

            msvcrt.locking(handle, msvcrt.LK_NBLCK, 1)  # type: ignore[attr-defined,unused-ignore]
    except OSError as cause:
        os.close(handle)
        raise RequestError(
            "another program keeps the journal of this folder",
            where=str(path.parent),
            found=f"{path.name} is locked",
            expected="one `gainwright watch` or `batch` at a time with one output folder",
            advice="end the other one, or name another folder with --out",
        ) from cause
    return handle
