"""Work on files that may crash or hang a library: in a child process, bounded in time and memory."""

import json
import os
import subprocess
import sys
from typing import Any

from ...ident.errors import RecordError

MEMORY_BYTES = 8 * 2**30
SECONDS = 60


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
    environment = {**os.environ, "OPENBLAS_NUM_THREADS": "1", "OMP_NUM_THREADS": "1", "HDF5_USE_FILE_LOCKING": "FALSE"}
    with subprocess.Popen(
        [sys.executable, "-P", "-m", module],
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        env=environment,
    ) as child:
        try:
            output, errors = child.communicate(json.dumps(bounded).encode(), timeout=seconds)
        except subprocess.TimeoutExpired as problem:
            child.kill()
            child.communicate()
            raise RecordError(
                "reading this log takes too long",
                where=where,
                found=f"no answer within {seconds:g} s",
                advice="the file may be damaged: copy it again, or write it out anew",
            ) from problem
    if child.returncode != 0:
        last = errors.decode("utf-8", "replace").strip().splitlines()[-1:] or ["no message"]
        raise RecordError(
            "the library that reads this log crashed on it",
            where=where,
            found=f"exit {child.returncode}: {last[0][:200]}",
            advice="the file may be damaged: copy it again, or write it out anew",
        )
    line, _, body = output.partition(b"\n")
    try:
        return json.loads(line), body
    except ValueError as problem:
        raise RecordError("the reading process gave no answer", where=where, found=repr(line[:80])) from problem
