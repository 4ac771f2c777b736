"""The whole job on the samples, the share of each stage, and how long the command takes to say its help."""

import resource
import subprocess
import sys
import time
from collections import defaultdict
from pathlib import Path

from gainwright.io.job import process_rig
from measure import Line

SAMPLES = Path(__file__).resolve().parents[2] / "sample_runs"
STAGES = {
    "reading": "reading",
    "fitting": "fitting",
    "drawing plausible": "fitting",
    "choosing": "choosing gains",
    "building": "gain ladder",
    "the ": "gain sets",
}


def job_lines(quick):
    """`process` without report on each sample; processor time of this process by the stage it names."""
    rigs = sorted(SAMPLES.glob("*/rig.toml"))
    for rig in rigs[:1] if quick else rigs:
        spent, now = defaultdict(float), ["reading", time.process_time()]

        def heard(said, share=0.0, spent=spent, now=now):
            moment = time.process_time()
            spent[now[0]] += moment - now[1]
            now[:] = [next((v for k, v in STAGES.items() if said.startswith(k)), said.split()[0]), moment]

        begun = time.process_time()
        process_rig(rig, heard)
        heard("end")
        total = time.process_time() - begun
        parts = sorted(spent.items(), key=lambda pair: -pair[1])
        beside = tuple((f"% {name}", 100 * part / total) for name, part in parts if part > 0.01 * total)
        yield Line("process", rig.parent.name, total, beside)


def start_lines(quick):
    """`gainwright --help` in a fresh process, beside a bare interpreter."""
    command = [str(Path(sys.executable).with_name("gainwright")), "--help"]
    bare = _child([sys.executable, "-c", "pass"])
    taken = _child(command)
    yield Line("start-up", "--help", taken, (("of a bare interpreter", taken / bare),))


def _child(command, times=3):
    """Least processor time of a child process, s."""
    found = []
    for _ in range(times):
        before = resource.getrusage(resource.RUSAGE_CHILDREN)
        subprocess.run(command, check=True, capture_output=True)
        after = resource.getrusage(resource.RUSAGE_CHILDREN)
        found.append(after.ru_utime + after.ru_stime - before.ru_utime - before.ru_stime)
    return max(min(found), 1e-3)
