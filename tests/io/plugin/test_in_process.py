"""The in-process object: it buffers, never raises into its host, works on its own thread and tells by callback."""

import threading
import time
from pathlib import Path

import numpy as np
import pytest
from gainwright.io.plugin.apart import do_apart, enough_apart
from gainwright.io.plugin.enough import Enough
from gainwright.io.plugin.guard import Guard
from gainwright.io.plugin.in_process import InProcess, table
from gainwright.io.plugin.jobs import Done, Job
from test_watching import RIG, log

TIME = 0.05 * np.arange(100)


@pytest.fixture
def rig(tmp_path: Path) -> Path:
    (tmp_path / "runs").mkdir()
    log(tmp_path / "runs" / "step_1.csv", 1)
    (tmp_path / "rig.toml").write_text(RIG, "utf-8")
    return tmp_path / "rig.toml"


def noting(job: Job) -> Done:
    """What a job would be done from, in place of doing it."""
    assert job.fresh is not None
    return Done(job.key, job.label, job.folder, 0, "released", job.fresh.read_text("utf-8"))


class Fed:
    """An in-process object with what it handed back."""

    def __init__(self, rig: Path, **changes: object) -> None:
        self.results: list[Done] = []
        self.enough: list[tuple[str, Enough]] = []
        given = {"work": noting, "on_result": self.results.append, **changes}
        self.plugin = InProcess(rig, rig.parent / "out", **given)  # type: ignore[arg-type]

    def closed(self) -> list[Done]:
        assert self.plugin.close(30.0)
        return self.results


def test_samples_one_by_one_and_in_arrays_become_one_run(rig: Path) -> None:
    """Buffers may be used again by the host at once; the written run gives the same numbers back."""
    fed = Fed(rig)
    fed.plugin.start("step 7")
    fed.plugin.sample(0.0, 1.0, 2.0)
    buffer = np.array([0.1, 0.2])
    fed.plugin.sample(buffer, buffer + 1.0, buffer + 2.0)
    buffer[:] = -1.0
    fed.plugin.end()
    (done,) = fed.closed()
    assert done.label == "step_7"
    assert done.said == "time,command,response\n0.0,1.0,2.0\n0.1,1.1,2.1\n0.2,1.2,2.2\n"
    assert (rig.parent / "out" / "runs" / "step_7.csv").read_text("utf-8") == done.said
    assert fed.plugin.faults == ()


def test_runs_may_be_fed_at_the_same_time_and_a_name_twice_is_numbered(rig: Path) -> None:
    """Told apart by what the host calls them."""
    fed = Fed(rig)
    for run in (1, 2):
        fed.plugin.start("../a", run=run)
    for run in (1, 2, 1):
        fed.plugin.sample(TIME, TIME, TIME + run, run=run)
    fed.plugin.end(run=2)
    fed.plugin.end(run=1)
    first, second = fed.closed()
    assert (first.label, second.label) == ("a", "a_2")
    assert (first.said.count("\n"), second.said.count("\n")) == (101, 201)


@pytest.mark.parametrize(("planned", "complete"), [(101, True), (None, False)])
def test_a_run_that_was_stopped_early_is_kept_and_not_tuned_from(
    rig: Path, planned: int | None, complete: bool
) -> None:
    """By its host's word, or by its missing samples whatever the host says."""
    fed = Fed(rig)
    fed.plugin.start("a", planned_samples=planned)
    fed.plugin.sample(TIME, TIME, TIME)
    fed.plugin.end(complete=complete)
    (done,) = fed.closed()
    assert (done.status, done.code) == ("stopped early", 4)
    assert [path.name for path in (rig.parent / "out" / "runs").iterdir()] == ["a.stopped.csv"]
    assert not (rig.parent / "out" / "a").exists()


def test_nothing_that_goes_wrong_reaches_the_host(rig: Path) -> None:
    """Nonsense in every call, a callback that raises, a job that breaks; the next run is done all the same."""

    def tell(done: Done) -> None:
        told.append(done.label)
        raise RuntimeError("callback")

    told: list[str] = []
    fed = Fed(rig, on_result=tell)
    fed.plugin.sample("no number", None, object())
    fed.plugin.sample(1.0, 2.0, 3.0, run="never started")
    fed.plugin.end(run="never started")
    fed.plugin.start("a")
    fed.plugin.sample([1.0, 2.0], [1.0], [1.0])
    fed.plugin.end()
    fed.plugin.start("b")
    fed.plugin.sample(TIME, TIME, TIME)
    fed.plugin.end()
    fed.closed()
    assert told == ["a", "b"]
    kinds = [fault.strip().splitlines()[-1].split(":")[0] for fault in fed.plugin.faults]
    assert sorted(kinds) == ["KeyError", "KeyError", "RuntimeError", "RuntimeError", "ValueError", "ValueError"]


def test_the_host_is_never_kept_waiting(rig: Path) -> None:
    """While a job runs, ten thousand samples are taken in less than 0.1 ms each, and on another thread."""
    begun, go_on, threads = threading.Event(), threading.Event(), []

    def slow(job: Job) -> Done:
        threads.append(threading.current_thread())
        begun.set()
        go_on.wait(30.0)
        return noting(job)

    fed = Fed(rig, work=slow)
    for name in ("a", "b"):
        fed.plugin.start(name)
        fed.plugin.sample(TIME, TIME, TIME)
        fed.plugin.end()
    assert begun.wait(10.0)
    fed.plugin.start("c")
    own = time.thread_time()
    for _ in range(10_000):
        fed.plugin.sample(0.0, 1.0, 2.0)
    assert time.thread_time() - own < 1.0
    fed.plugin.end()
    assert fed.results == []
    assert not fed.plugin.close(0.01)
    go_on.set()
    assert [done.label for done in fed.closed()] == ["a", "b", "c"]
    assert threading.main_thread() not in threads


def test_a_growing_run_is_looked_at_and_told_once(rig: Path) -> None:
    """Not before it has fifty samples, and during the run."""
    looked: list[int] = []
    told = threading.Event()

    def look(rig_file: Path, run: Path) -> Enough:
        looked.append(run.read_text("utf-8").count("\n") - 1)
        return Enough(len(looked) == 2, "made up")

    enough: list[tuple[str, Enough]] = []

    def tell(name: str, answer: Enough) -> None:
        enough.append((name, answer))
        told.set()

    fed = Fed(rig, on_enough=tell, look=look, look_every_s=0.01)
    fed.plugin.start("a")
    fed.plugin.sample(TIME[:40], TIME[:40], TIME[:40])
    time.sleep(0.1)
    fed.plugin.sample(TIME[40:], TIME[40:], TIME[40:])
    assert told.wait(10.0)
    time.sleep(0.1)
    fed.plugin.end()
    fed.closed()
    assert looked == [100, 100]
    assert enough == [("a", Enough(True, "made up"))]


def test_the_work_is_done_in_a_process_of_its_own(rig: Path, tmp_path: Path) -> None:
    """The real thing once: a record that is enough, one that is not, and a fresh run that confirms the fit."""
    log(tmp_path / "fresh.csv", 2)
    values = np.loadtxt(tmp_path / "fresh.csv", delimiter=",", skiprows=1).T
    columns = dict(zip(("time", "command", "response"), values, strict=True))
    whole, short = tmp_path / "whole.csv", tmp_path / "short.csv"
    whole.write_bytes(table(columns))
    short.write_bytes(table({name: column[:44] for name, column in columns.items()}))
    answer = enough_apart(rig, whole)
    assert answer.enough, answer.said
    assert answer.said.startswith(("lag: gain 2 mm/V", "lag: gain 2.01 mm/V", "lag: gain 1.99 mm/V"))
    assert not enough_apart(rig, short).enough
    done = do_apart(Job("k", "fresh", rig, tmp_path / "out" / "fresh", whole, plain=True, with_report=False))
    assert (done.status, done.code) == ("released", 0), done.said
    assert (done.folder / "gains.json").exists()


def test_a_guard_lets_an_interrupt_through() -> None:
    """Control-C is the host's."""
    guard = Guard()
    with pytest.raises(KeyboardInterrupt), guard:
        raise KeyboardInterrupt
    assert guard.faults == []
