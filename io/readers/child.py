"""Work on files that may crash or hang a library: in a child process, bounded in time and memory."""

import contextlib
import json
import os
import subprocess
import sys
import threading
from collections.abc import Iterator
from typing import Any

from ...ident.errors import RecordError

MEMORY_BYTES = 8 * 2**30
SECONDS = 60
LONGEST = 24 * 3600  # s of processor time, for a log that is read part by part


def ask_child(module: str, request: dict[str, Any], where: str, *, seconds: float = SECONDS) -> tuple[Any, bytes]:
    """Run `python -m module` with a request on its input.

    Parameters
    ----------
    module : str
        Reads one JSON value, writes one line of JSON and then bytes.
    request : dict
        `memory` (bytes) and `seconds` are added.
    where : str
        The file, for messages.
    seconds : float
        Wall clock after which the child is ended.

    Returns
    -------
    head : the JSON value
    body : bytes

    Raises
    ------
    RecordError
        When the child crashes, hangs or answers nonsense.
    """
    bounded = {**request, "memory": MEMORY_BYTES, "seconds": max(1, int(seconds))}
    with _started(module) as child:
        try:
            output, errors = child.communicate(json.dumps(bounded).encode(), timeout=seconds)
        except subprocess.TimeoutExpired as problem:
            child.kill()
            child.communicate()
            raise _too_long(where, seconds) from problem
    if child.returncode != 0:
        raise _crashed(where, child.returncode, errors)
    line, _, body = output.partition(b"\n")
    return _head(line, where), body


def stream_child(
    module: str, request: dict[str, Any], where: str, *, seconds: float = SECONDS
) -> Iterator[tuple[Any, bytes]]:
    """The same for an answer in many parts, none of them kept here.

    Parameters
    ----------
    seconds : float
        Wall clock for each part. The processor time of the child is not bounded: a sound log may be of any length.

    Yields
    ------
    head : the JSON value of a part, with its count of `bytes`
    body : bytes

    Raises
    ------
    RecordError
        As `ask_child`.
    """
    bounded = {**request, "memory": MEMORY_BYTES, "seconds": LONGEST}
    with _started(module, quiet=True) as child:
        assert child.stdin is not None
        assert child.stdout is not None
        late = threading.Event()
        ended = False
        try:
            with contextlib.suppress(OSError):  # a child that is gone already is told by its exit
                child.stdin.write(json.dumps(bounded).encode())
                child.stdin.close()
            while not ended:
                part = _part(child, where, seconds, late)
                if part is None:
                    ended = True
                else:
                    yield part
        finally:
            if not ended:
                child.kill()
    if late.is_set():
        raise _too_long(where, seconds)
    if child.returncode != 0:
        raise _crashed(where, child.returncode, b"")


def _part(
    child: subprocess.Popen[bytes], where: str, seconds: float, late: threading.Event
) -> tuple[Any, bytes] | None:
    """The next part of an answer; None at its end, and when the child was ended for being late."""

    def end() -> None:
        late.set()
        child.kill()

    watch = threading.Timer(seconds, end)
    watch.start()
    try:
        assert child.stdout is not None
        line = child.stdout.readline()
        if not line.endswith(b"\n"):
            return None
        head = _head(line, where)
        body = child.stdout.read(int(head["bytes"]))
    finally:
        watch.cancel()
    return (head, body) if len(body) == head["bytes"] else None


def _started(module: str, *, quiet: bool = False) -> subprocess.Popen[bytes]:
    threads = dict.fromkeys(("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS"), "1")
    return subprocess.Popen(
        [sys.executable, "-P", "-m", module],
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        stderr=subprocess.DEVNULL if quiet else subprocess.PIPE,
        env={**os.environ, **threads, "HDF5_USE_FILE_LOCKING": "FALSE"},
    )


def _head(line: bytes, where: str) -> Any:
    try:
        return json.loads(line)
    except ValueError as problem:
        raise RecordError("the reading process gave no answer", where=where, found=repr(line[:80])) from problem


def _too_long(where: str, seconds: float) -> RecordError:
    return RecordError(
        "reading this log takes too long",
        where=where,
        found=f"no answer within {seconds:g} s",
        advice="the file may be damaged: copy it again, or write it out anew",
    )


def _crashed(where: str, code: int, errors: bytes) -> RecordError:
    last = errors.decode("utf-8", "replace").strip().splitlines()[-1:] or ["no message"]
    return RecordError(
        "the library that reads this log crashed on it",
        where=where,
        found=f"exit {code}: {last[0][:200]}",
        advice="the file may be damaged: copy it again, or write it out anew",
    )
