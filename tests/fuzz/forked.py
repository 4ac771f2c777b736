"""The reading child of one HDF5 log, forked instead of started: the same code, bounds and pipes in milliseconds.

The real child pays a quarter of a second for its imports. This one is a fork of a process that has them already; from
its `main()` on everything is the child's own: the bound on memory and time, the request on its input, the answer on its
output, and that it may crash. `test_forked.py` compares it with the real one.
"""

import importlib
import io
import json
import os
import select
import signal
import sys
import time
import traceback
from typing import Any, NoReturn

import h5py
import numpy as np
from gainwright.ident.errors import RecordError
from gainwright.io.readers import child, hdf5_child, nexus

SECONDS = 20.0
_READ_AHEAD = 1 << 20

PRELOADED = (h5py, np, hdf5_child, nexus)  # what every fork finds imported


def ask_forked(module: str, request: dict[str, Any], where: str, *, seconds: float = SECONDS) -> tuple[Any, bytes]:
    """What `child.ask_child` does, with a fork; a RecordError when the child crashes, hangs or answers nonsense."""
    bounded = json.dumps({**request, "memory": child.MEMORY_BYTES, "seconds": int(seconds)}).encode()
    ours, theirs = os.pipe()
    errors, told = os.pipe()
    process = os.fork()
    if process == 0:
        os.close(ours)
        os.close(errors)
        _be_child(module, bounded, theirs, told)
    os.close(theirs)
    os.close(told)
    output, complained, late = _drained(process, ours, errors, time.monotonic() + seconds)
    _, status = os.waitpid(process, 0)
    code = os.waitstatus_to_exitcode(status)
    if late:
        raise child._too_long(where, seconds)
    if code != 0:
        if b"Traceback" in complained:
            raise UncaughtError(complained.decode("utf-8", "replace"))
        raise child._crashed(where, code, complained)
    line, _, body = output.partition(b"\n")
    try:
        return json.loads(line), body
    except ValueError as problem:
        raise RecordError("the reading process gave no answer", where=where, found=repr(line[:80])) from problem


class UncaughtError(Exception):
    """The child ended by an exception of Python: for the person it is an error in words, for us a fault to mend."""


def _be_child(module: str, request: bytes, output: int, told: int) -> NoReturn:
    code = 1
    try:
        signal.setitimer(signal.ITIMER_VIRTUAL, 0.0)
        os.dup2(output, 1)
        os.dup2(told, 2)
        sys.stdin = io.TextIOWrapper(io.BytesIO(request))
        sys.stdout = io.TextIOWrapper(io.FileIO(1, "w", closefd=False), write_through=True)
        sys.stderr = io.TextIOWrapper(io.FileIO(2, "w", closefd=False), write_through=True)
        answer = sys.stdout
        importlib.import_module(module).main()
        answer.flush()
        code = 0
    except BaseException:  # noqa: BLE001 - a fork must never come back
        traceback.print_exc(file=sys.stderr)
    finally:
        os._exit(code)


def _drained(process: int, output: int, errors: int, end: float) -> tuple[bytes, bytes, bool]:
    """Everything from both pipes until the child closes them, or is ended for being late."""
    parts: dict[int, list[bytes]] = {output: [], errors: []}
    still, late = [output, errors], False
    while still:
        ready, _, _ = select.select(still, [], [], max(0.0, end - time.monotonic()))
        if not ready and not late:
            os.kill(process, signal.SIGKILL)
            late, end = True, end + 5.0
        for pipe in ready:
            got = os.read(pipe, _READ_AHEAD)
            parts[pipe].append(got)
            if not got:
                still.remove(pipe)
    for pipe in parts:
        os.close(pipe)
    return b"".join(parts[output]), b"".join(parts[errors]), late
