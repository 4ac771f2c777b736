"""kill -9 at random moments under watch and batch: every run done, none written twice, nothing half-written."""

import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest
from gainwright.io.plugin.journal import Journal
from stand_in import whole

pytestmark = pytest.mark.skipif(os.name != "posix" or not Path("/proc").is_dir(), reason="kills workers through /proc")

WATCH = """
import sys, threading
sys.path.insert(0, {here!r})
from pathlib import Path
from gainwright.io.plugin.watching import Watch, watch
from stand_in import quick_work
if __name__ == "__main__":
    top = Path(sys.argv[1])
    asked = Watch(top / "runs", top / "rig.toml", top / "out", quiet_s=0.05, every_s=0.02, once=True)
    watch(asked, lambda said: None, lambda done: print(done.label, flush=True), threading.Event(), quick_work)
"""
BATCH = """
import sys
sys.path.insert(0, {here!r})
from pathlib import Path
from gainwright.io.plugin.batching import batch, processes
from stand_in import quick_work
if __name__ == "__main__":
    top = Path(sys.argv[1])
    rigs = sorted(top.glob("rigs/*/rig.toml"))
    batch(rigs, top / "out", processes(2), lambda done, *_: print(done.label, flush=True), work=quick_work)
"""


def children(parent: int) -> list[int]:
    """Processes that a process started, from /proc."""
    found = []
    for place in Path("/proc").iterdir():
        if place.name.isdigit():
            try:
                stat = (place / "stat").read_text()
            except OSError:
                continue
            if int(stat.rpartition(")")[2].split()[1]) == parent:
                found.append(int(place.name))
    return found


def run_and_kill(script: Path, top: Path, kills: int, generator: np.random.Generator) -> int:
    """Start the program again and again, kill it or its workers a random time after its first results; how often."""
    killed = 0
    while killed < kills:
        with subprocess.Popen(
            [sys.executable, "-P", str(script), str(top)], stdout=subprocess.PIPE, stderr=subprocess.DEVNULL, text=True
        ) as program:
            assert program.stdout is not None
            for _ in range(int(generator.integers(0, 3))):
                if not program.stdout.readline():
                    return killed
            time.sleep(float(generator.uniform(0.0, 0.15)))
            workers = children(program.pid)
            victims = workers[-1:] if generator.random() < 0.3 else [program.pid]
            for victim in victims:
                os.kill(victim, signal.SIGKILL)
                killed += 1
            if victims != [program.pid]:
                time.sleep(float(generator.uniform(0.0, 0.1)))
                program.kill()
                killed += 1
    return killed


def finish(script: Path, top: Path) -> None:
    """Let it go to its end."""
    ended = subprocess.run(
        [sys.executable, "-P", str(script), str(top)], capture_output=True, text=True, timeout=300, check=False
    )
    assert ended.returncode == 0, ended.stderr


def survives(top: Path, script: Path, folders: list[Path], kills: int, seed: int) -> None:
    """Kill, finish, and look at every folder of results and at the journal."""
    killed = run_and_kill(script, top, kills, np.random.default_rng(seed))
    assert killed >= kills, f"all was done after {killed} kills: more runs are needed"
    finish(script, top)
    assert [folder for folder in folders if not whole(folder)] == []
    with Journal(top / "out") as journal:
        entries = journal.entries()
    assert len(entries) == len({entry.label for entry in entries}) == len(folders)
    assert {entry.code for entry in entries} <= {0, 3}


def watch_through_kills(top: Path, runs: int, kills: int, seed: int) -> None:
    """Every second run is held."""
    script = top / "watch.py"
    script.write_text(WATCH.format(here=str(Path(__file__).parent)))
    (top / "rig.toml").write_text("made\n")
    (top / "runs").mkdir()
    names = [f"run_{number:03d}.csv" for number in range(runs)]
    for number, name in enumerate(names):
        (top / "runs" / name).write_text(f"{number},{'held' if number % 2 else 'fine'}\n")
    survives(top, script, [top / "out" / name for name in names], kills, seed)


def batch_through_kills(top: Path, jobs: int, kills: int, seed: int) -> None:
    """Two workers."""
    script = top / "batch.py"
    script.write_text(BATCH.format(here=str(Path(__file__).parent)))
    folders = [top / "rigs" / f"{number:03d}" for number in range(jobs)]
    for number, folder in enumerate(folders):
        folder.mkdir(parents=True)
        (folder / "rig.toml").write_text(f"{number},{'held' if number % 2 else 'fine'}\n")
    survives(top, script, [folder / "out" for folder in folders], kills, seed)


def test_a_watch_survives_a_few_kills(tmp_path: Path) -> None:
    """Six moments."""
    watch_through_kills(tmp_path, 24, 6, 1)


def test_a_batch_survives_a_few_kills(tmp_path: Path) -> None:
    """Fifty jobs, six moments."""
    batch_through_kills(tmp_path, 50, 6, 2)


@pytest.mark.kills
@pytest.mark.timeout(3600)
@pytest.mark.parametrize("seed", range(5))
def test_a_watch_survives_a_hundred_kills(tmp_path: Path, seed: int) -> None:
    """Five times twenty moments."""
    watch_through_kills(tmp_path, 120, 20, 10 + seed)


@pytest.mark.kills
@pytest.mark.timeout(3600)
@pytest.mark.parametrize("seed", range(5))
def test_a_batch_survives_a_hundred_kills(tmp_path: Path, seed: int) -> None:
    """Five times twenty moments."""
    batch_through_kills(tmp_path, 200, 20, 20 + seed)


@pytest.mark.kills
@pytest.mark.timeout(3600)
def test_a_thousand_jobs_lose_nothing(tmp_path: Path) -> None:
    """Twenty moments, of the program and of its workers."""
    batch_through_kills(tmp_path, 1000, 20, 30)
