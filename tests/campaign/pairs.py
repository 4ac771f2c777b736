"""How often closing cries wolf, and how often it misses: `python -P tests/campaign/pairs.py --rigs 30 --seed 5`.

A pair is a fit and one held-out run of the same true rig, as it was or after a change drawn at random. One fit serves
several held-out runs; a rig depends on seed and index only, so that a long run can be made in pieces:
`--start 30 --lines b.json` and, at the end, `--sum a.json b.json` for the table over all of them.
"""

import argparse
import json
import os
import sys
import tempfile
import warnings
from concurrent.futures import ProcessPoolExecutor
from dataclasses import asdict
from multiprocessing import get_context
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parent))

import paths  # noqa: F401  (puts the kit on the path before it is imported)
from pair_table import line, summary
from pairing import Pair, RigPairs, pairs_of_rig

Task = tuple[int, int, int, int, str]


def one(task: Task) -> RigPairs:
    """All pairs of one rig."""
    warnings.simplefilter("ignore")
    seed, index, unchanged, changed, folder = task
    return pairs_of_rig(seed, index, unchanged, changed, Path(folder))


def read(files: list[Path]) -> list[RigPairs]:
    """Rigs of earlier pieces."""
    rows = [json.loads(text) for file in files for text in file.read_text("utf-8").splitlines()]
    return [RigPairs(**{**row, "pairs": [Pair(**pair) for pair in row["pairs"]]}) for row in rows]


def main() -> None:
    ask = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    ask.add_argument("--rigs", type=int, default=30)
    ask.add_argument("--seed", type=int, default=1)
    ask.add_argument("--start", type=int, default=0, help="index of the first rig")
    ask.add_argument("--unchanged", type=int, default=2, help="held-out runs a rig as it was")
    ask.add_argument("--changed", type=int, default=4, help="held-out runs a rig after a change each")
    ask.add_argument("--workers", type=int, default=1)
    ask.add_argument("--lines", type=Path, help="write one JSON line a rig here, as they are done")
    ask.add_argument("--sum", type=Path, nargs="+", help="run nothing: the table over such files")
    given = ask.parse_args()
    if given.sum:
        print(summary(read(given.sum)))
        return
    os.environ.setdefault("PYTHONWARNINGS", "ignore")
    with tempfile.TemporaryDirectory() as scratch:
        numbers = range(given.start, given.start + given.rigs)
        tasks = [(given.seed, i, given.unchanged, given.changed, str(Path(scratch) / str(i))) for i in numbers]
        finished = []
        with ProcessPoolExecutor(given.workers, mp_context=get_context("fork")) as pool:
            for rig in pool.map(one, tasks):
                finished.append(rig)
                print(line(rig), flush=True)
                if given.lines:
                    with given.lines.open("a", encoding="utf-8") as file:
                        file.write(json.dumps(asdict(rig), default=float) + "\n")
    print()
    print(summary(finished))


if __name__ == "__main__":
    main()
