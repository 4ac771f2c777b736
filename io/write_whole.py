"""Results that are either whole or absent: an output folder that one job at a time may change."""

import contextlib
import errno
import json
import os
import socket
import time
from collections.abc import Mapping
from pathlib import Path
from types import TracebackType
from typing import Self

from ..ident.errors import RequestError

SHEET = "gains.json"
RECEIPT = "job.json"  # of a job among many: which one it was and how it ended
RESULTS = (SHEET, "dossier.h5", "report.html", RECEIPT)
_LOCK = ".gainwright.lock"
_PART = ".gainwright-part"
_POLL_S = 0.05


class OutputFolder:
    """The folder of one job's results, held by that job from its start to its end.

    Entering takes the lock, clears what a killed job left half-written, and sets results of an earlier job aside:
    ``gains.json`` becomes ``gains.superseded.json``, and so on. A job that fails therefore leaves no current sheet.

    Parameters
    ----------
    folder : Path
        Made when it does not exist; removed again if nothing was put into it.
    patience_s : float
        How long to wait for another job that holds the folder before giving up.

    Raises
    ------
    RequestError
        On entering, when the folder can't be made or written to, or stays held by another job.
    """

    def __init__(self, folder: Path, *, patience_s: float = 120.0) -> None:
        self.folder = folder
        self.patience_s = patience_s
        self._made = False
        self._lock: int | None = None

    def __enter__(self) -> Self:
        try:
            self._made = not self.folder.exists()
            self.folder.mkdir(parents=True, exist_ok=True)
            self._lock = _take_lock(self.folder, self.patience_s)
            _clear_parts(self.folder)
            _set_aside(self.folder)
        except OSError as cause:
            self._release()
            raise _refusal(self.folder, cause) from cause
        return self

    def __exit__(
        self, kind: type[BaseException] | None, value: BaseException | None, trace: TracebackType | None
    ) -> None:
        self._release()

    def write(self, contents: Mapping[str, bytes]) -> None:
        """Put every file in place whole; the sheet last, so that a sheet that is there stands beside its dossier.

        Parameters
        ----------
        contents : mapping of file name to its bytes

        Raises
        ------
        RequestError
            When the folder is read-only or full; nothing of this call is left half-written.
        """
        staged: list[tuple[Path, Path]] = []
        try:
            for name in sorted(contents, key=lambda name: name == SHEET):
                part = self.folder / f".{name}{_PART}"
                staged.append((part, self.folder / name))
                _write_durably(part, contents[name])
            for part, final in staged:
                os.replace(part, final)
            _sync_folder(self.folder)
        except OSError as cause:
            raise _refusal(self.folder, cause) from cause
        finally:
            for part, _ in staged:
                part.unlink(missing_ok=True)

    def _release(self) -> None:
        if self._lock is not None:
            if os.name == "posix":  # elsewhere an open file can't be removed, and stays
                (self.folder / _LOCK).unlink(missing_ok=True)
            os.close(self._lock)
            self._lock = None
        if self._made and self.folder.is_dir() and not any(self.folder.iterdir()):
            self.folder.rmdir()


def _write_durably(path: Path, content: bytes) -> None:
    with path.open("wb") as stream:
        stream.write(content)
        stream.flush()
        os.fsync(stream.fileno())


def _sync_folder(folder: Path) -> None:
    if os.name != "posix":
        return  # elsewhere a folder can't be opened for this, and the rename itself is what there is
    handle = os.open(folder, os.O_RDONLY)
    try:
        os.fsync(handle)
    finally:
        os.close(handle)


def _clear_parts(folder: Path) -> None:
    for part in folder.glob(f".*{_PART}"):
        part.unlink(missing_ok=True)


def _set_aside(folder: Path) -> None:
    for name in RESULTS:
        current = folder / name
        if current.exists():
            os.replace(current, folder / f"{current.stem}.superseded{current.suffix}")
    _sync_folder(folder)


def _take_lock(folder: Path, patience_s: float) -> int:
    """Open and lock the folder's lock file; the operating system frees it when the process dies, however it dies."""
    path = folder / _LOCK
    end = time.monotonic() + patience_s
    while True:
        handle = os.open(path, os.O_RDWR | os.O_CREAT, 0o644)
        if _lock_now(handle) and _is_current(handle, path):
            _sign(handle)
            return handle
        os.close(handle)
        if time.monotonic() >= end:
            raise RequestError(
                "another job holds this output folder",
                where=str(folder),
                found=f"{path.name}: {_holder(path)}, still held after {patience_s:g} s",
                expected="one job at a time in one folder",
                advice="wait for that job to end, or name another folder with --out",
            )
        time.sleep(_POLL_S)


def _sign(handle: int) -> None:
    """Say in the lock who holds it; where there is no room for that, the lock holds all the same."""
    with contextlib.suppress(OSError):
        os.ftruncate(handle, 0)
        os.write(handle, json.dumps({"pid": os.getpid(), "host": socket.gethostname()}).encode())


def _lock_now(handle: int) -> bool:
    try:
        if os.name == "posix":
            import fcntl

            fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
        else:
            import msvcrt

            msvcrt.locking(handle, msvcrt.LK_NBLCK, 1)  # type: ignore[attr-defined,unused-ignore]
    except OSError as cause:
        if cause.errno in (errno.EACCES, errno.EAGAIN, errno.EDEADLK):
            return False
        raise
    return True


def _is_current(handle: int, path: Path) -> bool:
    """The holder before us removes the file: a lock on a removed file is no lock."""
    try:
        return os.path.samestat(os.fstat(handle), path.stat())
    except FileNotFoundError:
        return False


def _holder(path: Path) -> str:
    try:
        return path.read_text("utf-8") or "holder unknown"
    except OSError:
        return "holder unknown"


def _refusal(folder: Path, cause: OSError) -> RequestError:
    return RequestError(
        "the results can't be written here",
        where=str(folder),
        found=cause.strerror or str(cause),
        expected="a folder that this user may write to, with free space for a few MB",
        advice="name another folder with --out, or free the space",
    )
