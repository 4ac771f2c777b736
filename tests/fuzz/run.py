"""Puts many hostile inputs through the commands and prints what came of it.

`python -P tests/fuzz/run.py --kind csv --inputs 600000 --seed 1 --workers 2`. Each worker has its own seed, counted
up from the given one. With the extra `fuzz` (atheris) the kinds read in this process are led by coverage; without it,
and for HDF5 always, inputs are made and spoilt by chance. One input of each fault is kept.
"""

import argparse
import importlib.util
import json
import platform
import subprocess
import sys
import time
from collections import Counter
from pathlib import Path
from typing import Any

WORKER = Path(__file__).resolve().parent / "worker.py"


def main() -> int:
    ask = argparse.ArgumentParser(description=__doc__)
    ask.add_argument("--kind", choices=("csv", "rigfile", "hdf5", "table"), required=True)
    ask.add_argument("--inputs", type=int, default=10_000)
    ask.add_argument("--seed", type=int, default=1)
    ask.add_argument("--workers", type=int, default=1)
    ask.add_argument("--keep", type=Path, default=Path("fuzz_found"), help="folder for one input of each fault")
    given = ask.parse_args()
    begin = time.monotonic()
    share = -(-given.inputs // given.workers)
    folders = [given.keep / f"{given.kind}_{given.seed + number}" for number in range(given.workers)]
    workers = [_started(given.kind, share, given.seed + number, folder) for number, folder in enumerate(folders)]
    codes = [worker.wait() for worker in workers]
    tallies = [json.loads((folder / "tally.json").read_text("utf-8")) for folder in folders]
    print(_summary(given.kind, given.seed, tallies, codes, time.monotonic() - begin))
    print(f"inputs of faults and the slowest ones: {given.keep}")
    bad = any(tally["faults"] for tally in tallies) or any(codes) or sum(t["inputs"] for t in tallies) < given.inputs
    return 1 if bad else 0


def _started(kind: str, inputs: int, seed: int, folder: Path) -> subprocess.Popen[bytes]:
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "tally.json").write_text(json.dumps({"inputs": 0, "calls": {}, "faults": {}}), "utf-8")
    call = [sys.executable, "-P", str(WORKER), kind, str(inputs), str(seed), str(folder)]
    with (folder / "log.txt").open("wb") as log:
        return subprocess.Popen(call, stdout=log, stderr=log)


def _summary(kind: str, seed: int, tallies: list[dict[str, Any]], codes: list[int], seconds: float) -> str:
    calls, faults = Counter[str](), Counter[str]()
    for tally in tallies:
        calls.update(tally["calls"])
        faults.update(tally["faults"])
    guided = "by chance" if kind == "hdf5" or importlib.util.find_spec("atheris") is None else "led by coverage"
    ends = ", ".join(f"exit {code}: {count}" for code, count in sorted(calls.items()))
    lines = [
        f"{kind}, seed {seed}, {len(tallies)} workers, {guided}, Python {platform.python_version()}",
        f"inputs {sum(tally['inputs'] for tally in tallies)}; calls of the program {sum(calls.values())} ({ends})",
        f"faults {sum(faults.values())}" + "".join(f"\n  {count} x {key}" for key, count in faults.most_common()),
        f"slowest input {max(tally.get('slowest_s', 0.0) for tally in tallies):.2f} s of processor time",
        "memory, MB: " + ", ".join("{} to {}".format(*tally.get("memory_mb", (0, 0))) for tally in tallies),
        f"{sum(tally.get('processor_s', 0.0) for tally in tallies):.0f} s of processor time, {seconds:.0f} s in all",
    ]
    lines += [f"a worker ended with {code}: see its log.txt" for code in codes if code]
    return "\n".join(lines)


if __name__ == "__main__":
    sys.exit(main())
