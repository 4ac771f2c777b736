"""Runs the campaign and prints its table: `python -P tests/campaign/run.py --rigs 40 --seed 1 --workers 2`."""

import argparse
import json
import os
import sys
from dataclasses import asdict
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parent))

import paths  # noqa: F401  (puts the kit on the path before it is imported)
from proof.excitations import KINDS, TESTS
from proof.job import PYTHON
from proof.many import run_many, tasks
from proof.table import line, summary


def main() -> None:
    ask = argparse.ArgumentParser(description=__doc__)
    ask.add_argument("--rigs", type=int, default=40)
    ask.add_argument("--must-hold", type=int, default=0)
    ask.add_argument("--seed", type=int, default=1)
    ask.add_argument(
        "--start", type=int, default=0, help="index of the first rig; a rig depends on seed and index only"
    )
    ask.add_argument("--workers", type=int, default=1)
    ask.add_argument("--further", action="store_true", help="the three further families too")
    ask.add_argument("--only", help="families or kinds whose name holds this text")
    ask.add_argument("--keep", type=Path, help="folder that keeps every job's logs, rig file and sheet")
    ask.add_argument("--lines", type=Path, help="write one JSON line a job here")
    ask.add_argument("--python", help="interpreter whose gainwright is judged, such as that of a clean install")
    ask.add_argument("--tests", choices=KINDS, default=KINDS[0], help="how the engineer moves the command in fit runs")
    given = ask.parse_args()
    os.environ[TESTS] = given.tests
    if given.python:
        os.environ[PYTHON] = given.python
    chosen = tasks(given.rigs, given.must_hold, given.seed, given.further, given.start)
    if given.only:
        chosen = [task for task in chosen if given.only in task[1]]
    finished = run_many(chosen, given.workers, given.keep, lambda job: print(line(job), flush=True))
    if given.lines:
        rows = (json.dumps(asdict(job), default=str) for job in finished)
        given.lines.write_text("\n".join(rows) + "\n", encoding="utf-8")
    print()
    print(summary([job for job in finished if not job.kind], [job for job in finished if job.kind]))


if __name__ == "__main__":
    main()
