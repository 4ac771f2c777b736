"""Work in a process of its own, out of the way of the program that acquires."""

import json
import os
import subprocess
import sys
from dataclasses import asdict
from pathlib import Path
from typing import Any

from ...ident.errors import GainwrightError
from .enough import Enough, enough
from .jobs import Done, Job, do

_MODULE = "gainwright.io.plugin.apart"
_NICE = 5  # the acquisition comes first
_THREADS = {"OPENBLAS_NUM_THREADS": "1", "OMP_NUM_THREADS": "1", "MKL_NUM_THREADS": "1"}


def do_apart(job: Job) -> Done:
    """Do a job in a process of its own.

    Parameters
    ----------
    job : Job

    Raises
    ------
    GainwrightError
        When that process ends without an answer.
    """
    answer = _ask({"job": _plain(job)}, job.label)
    return Done(**{**answer, "folder": Path(answer["folder"])})


def enough_apart(rig_file: Path, run: Path) -> Enough:
    """Ask in a process of its own whether a record is enough.

    Parameters
    ----------
    rig_file, run : Path
        The run in plain columns: time in s, command, response.

    Raises
    ------
    GainwrightError
        When that process ends without an answer.
    """
    return Enough(**_ask({"enough": [str(rig_file), str(run)]}, str(run)))


def _plain(job: Job) -> dict[str, Any]:
    return json.loads(json.dumps(asdict(job), default=str))  # type: ignore[no-any-return]


def _ask(request: dict[str, Any], where: str) -> dict[str, Any]:
    ended = subprocess.run(
        [sys.executable, "-P", "-m", _MODULE],
        input=json.dumps(request).encode(),
        capture_output=True,
        env={**os.environ, **_THREADS},
        start_new_session=True,  # an interrupt of the acquisition is not meant for us
        check=False,
    )
    try:
        answer: dict[str, Any] = json.loads(ended.stdout.splitlines()[-1])
    except (IndexError, ValueError) as cause:
        last = ended.stderr.decode("utf-8", "replace").strip().splitlines()[-1:] or ["no message"]
        raise GainwrightError(
            "the process that works apart gave no answer",
            where=where,
            found=f"exit {ended.returncode}: {last[0][:200]}",
            advice="call `gainwright process` on the rig file to see the fault",
        ) from cause
    return answer


def _answer(request: dict[str, Any]) -> dict[str, Any]:
    if "enough" in request:
        return asdict(enough(*map(Path, request["enough"])))
    said = request["job"]
    job = Job(
        **{
            **said,
            "rig_file": Path(said["rig_file"]),
            "folder": Path(said["folder"]),
            "fresh": None if said["fresh"] is None else Path(said["fresh"]),
            "left_out": tuple(map(Path, said["left_out"])),
        }
    )
    done = do(job)
    return {**asdict(done), "folder": str(done.folder)}


if __name__ == "__main__":
    if hasattr(os, "nice"):
        os.nice(_NICE)
    print(json.dumps(_answer(json.load(sys.stdin))))
