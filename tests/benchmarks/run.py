"""Prints ratios of speed in one process: `python -P tests/benchmarks/run.py [--only NAME] [--quick] [--growth]`.

Processor time, medians; each is held against something measured in the same process. --growth adds the slopes of
cost, up to 1e7 samples (minutes).
"""

import argparse
import os
import platform
import sys
from pathlib import Path

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
os.environ.setdefault("OMP_NUM_THREADS", "1")
sys.path.insert(0, str(Path(__file__).resolve().parent))

import fits
import growth
import jobs
import loops
import signals

GROUPS = {
    "fit": fits.fit_lines,
    "starts": fits.start_lines,
    "intervals": fits.interval_lines,
    "spectra": signals.spectra_lines,
    "reading": signals.reading_lines,
    "locus": loops.locus_lines,
    "sets": loops.set_lines,
    "ensemble": loops.ensemble_lines,
    "process": jobs.job_lines,
    "start-up": jobs.start_lines,
}


def main() -> None:
    ask = argparse.ArgumentParser(description=__doc__)
    ask.add_argument("--only", choices=[*GROUPS, "growth"], help="one group")
    ask.add_argument("--quick", action="store_true", help="small sizes, seconds")
    ask.add_argument("--growth", action="store_true", help="slopes of cost too; minutes")
    given = ask.parse_args()
    groups = GROUPS | ({"growth": growth.growth_lines} if given.growth or given.only == "growth" else {})
    print(f"{platform.machine()}, {os.cpu_count()} processors, Python {platform.python_version()}\n")
    print("| group | what | processor time | beside it |\n|---|---|---|---|")
    for name, lines in groups.items():
        if given.only in (None, name):
            for line in lines(given.quick):
                print(line, flush=True)


if __name__ == "__main__":
    main()
