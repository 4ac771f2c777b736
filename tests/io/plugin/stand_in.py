"""A stand-in for the work of a job: its content is made up, its results are written by the same door as real ones."""

import os
import time
from pathlib import Path

from gainwright.io.plugin.jobs import Done, Job, receipt, receipt_bytes
from gainwright.io.write_whole import RECEIPT, OutputFolder

SIZE = 200_000


def quick_work(job: Job) -> Done:
    """Half a megabyte of results, 20 ms; a run with "poison" in it kills its worker, one with "fault" raises."""
    finished = receipt(job.folder, job.key)
    if finished is not None:
        return finished
    text = (job.fresh or job.rig_file).read_text("utf-8")
    if "poison" in text:
        os._exit(9)
    if "fault" in text:
        raise ZeroDivisionError("made up")
    code = 3 if "held" in text else 0
    done = Done(job.key, job.label, job.folder, code, "held" if code else "released", text[:20])
    with OutputFolder(job.folder) as output:
        time.sleep(0.02)
        body = (job.key * (SIZE // len(job.key))).encode()
        output.write({RECEIPT: receipt_bytes(done), "gains.json": body, "dossier.h5": body, "report.html": body})
    return done


def whole(folder: Path) -> bool:
    """Whether all results of one job are there, whole, from one attempt, and nothing else is."""
    names = {path.name for path in folder.iterdir()}
    if names != {RECEIPT, "gains.json", "dossier.h5", "report.html"}:
        return False
    bodies = {(folder / name).read_bytes() for name in ("gains.json", "dossier.h5", "report.html")}
    return len(bodies) == 1 and len(bodies.pop()) == SIZE // 64 * 64
