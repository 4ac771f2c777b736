"""Many jobs over a few processes."""

import tempfile
from collections.abc import Callable
from concurrent.futures import ProcessPoolExecutor
from multiprocessing import get_context
from pathlib import Path

from .families import FAMILIES, FURTHER
from .job import Finished, run_job
from .must_hold import KINDS, run_must_hold

Task = tuple[str, str, int, int, str]


def tasks(rigs: int, must_hold: int, seed: int, further: bool, start: int = 0) -> list[tuple[str, str, int, int]]:
    """(what, family or kind, seed, index) of every job."""
    families = list(FAMILIES) + (list(FURTHER) if further else [])
    ordinary = [("rig", families[i % len(families)], seed, i) for i in range(start, start + rigs)]
    kinds = list(KINDS)
    return ordinary + [("must hold", kinds[i % len(kinds)], seed, i) for i in range(must_hold)]


def one(task: Task) -> Finished:
    """One job in its folder."""
    what, name, seed, index, folder = task
    return (run_job if what == "rig" else run_must_hold)(name, seed, index, Path(folder))


def run_many(
    chosen: list[tuple[str, str, int, int]], workers: int, keep: Path | None, tell: Callable[[Finished], None]
) -> list[Finished]:
    """All jobs, told one by one in the order given."""
    with tempfile.TemporaryDirectory() as scratch:
        base = Path(scratch) if keep is None else keep
        full = [(*task, str(base / f"{task[0].replace(' ', '_')}_{task[3]:04d}")) for task in chosen]
        finished = []
        if workers == 1:
            for task in full:
                finished.append(one(task))
                tell(finished[-1])
            return finished
        with ProcessPoolExecutor(workers, mp_context=get_context("fork")) as pool:
            for done in pool.map(one, full):
                finished.append(done)
                tell(done)
        return finished
