"""Many jobs over an executor: one bad job never stops the rest, and a worker that dies loses nothing."""

import os
import signal
import threading
import time
from collections import Counter, deque
from collections.abc import Callable, Iterable, Iterator
from concurrent.futures import FIRST_COMPLETED, BrokenExecutor, Executor, Future, ProcessPoolExecutor, wait
from functools import partial
from multiprocessing import get_context

from ...ident.errors import GainwrightError
from .jobs import FAULT, STATUS, Done, Job, Work, do, fault_line
from .journal import Journal

MOST_DEATHS = 4  # of workers that had only this job; killed from outside is not the job's fault, so more than one
MOST_STARTS = 50
_PARENT_LOOKS_S = 0.2


def process_pool(workers: int) -> Executor:
    """A pool of processes that are started anew, compute with one thread each, and end when this program does.

    Parameters
    ----------
    workers : int
    """
    return ProcessPoolExecutor(workers, mp_context=get_context("spawn"), initializer=_settle, initargs=(os.getpid(),))


def run_jobs(
    jobs: Iterable[Job], journal: Journal, make: Callable[[], Executor], *, at_once: int, work: Work = do
) -> Iterator[Done]:
    """Do jobs, each in the journal before and after, and yield them as they end.

    Parameters
    ----------
    jobs : iterable of Job
        Taken one by one as there is room.
    journal : Journal
        Jobs that it knows as done are not asked about again here: leave them out of `jobs`.
    make : callable
        Makes the executor; called again after it broke.
    at_once : int
        Jobs handed to the executor at any time.
    work : callable
        Of this module's name space or importable where the executor works.
    """
    waiting, alone = iter(jobs), deque[Job]()
    deaths: Counter[str] = Counter()
    executor, running = make(), dict[Future[Done], Job]()
    try:
        while True:
            _fill(running, waiting, alone, at_once, partial(_submit, executor, journal, work))
            if not running:
                return
            ended, _ = wait(running, return_when=FIRST_COMPLETED)
            suspects: list[Job] = []
            if any(isinstance(future.exception(), BrokenExecutor) for future in ended):
                _close(executor, running)
                ended, executor = set(running), _started(make)
            for future in ended:
                job = running.pop(future)
                if future.cancelled() or isinstance(fault := future.exception(), BrokenExecutor):
                    suspects.append(job)
                else:
                    yield _noted(journal, future.result() if fault is None else _of_fault(job, fault))
            yield from _suspected(suspects, alone, deaths, journal)
    finally:
        _close(executor, running)


def _started(make: Callable[[], Executor]) -> Executor:
    """An executor of which a worker has answered: whoever dies afterwards died of its job, or by a hand from outside.

    Raises
    ------
    GainwrightError
        When worker after worker dies before it has begun.
    """
    for _ in range(MOST_STARTS):
        executor = make()
        fault = executor.submit(os.getpid).exception()
        if not isinstance(fault, BrokenExecutor):
            return executor
        executor.shutdown(wait=True)
    raise GainwrightError(
        "no worker stays alive",
        found=f"{MOST_STARTS} died before they had begun",
        advice="look for what ends processes on this machine (memory?); what is done is kept: give the command again",
    )


def _close(executor: Executor, running: Iterable[Future[Done]]) -> None:
    """Jobs that have not begun are dropped, those that have are waited for: their receipts tell of them."""
    for future in running:
        future.cancel()
    executor.shutdown(wait=True)


def _fill(
    running: dict[Future[Done], Job],
    waiting: Iterator[Job],
    alone: deque[Job],
    at_once: int,
    submit: Callable[[Job], Future[Done]],
) -> None:
    """Hand jobs out: after a death one suspect at a time, so that a guilty one is found; else as many as have room."""
    if alone:
        if not running:
            job = alone.popleft()
            running[submit(job)] = job
        return
    while len(running) < at_once and (next_job := next(waiting, None)) is not None:
        running[submit(next_job)] = next_job


def _submit(executor: Executor, journal: Journal, work: Work, job: Job) -> Future[Done]:
    journal.begin(job.key, job.label, job.folder)
    try:
        return executor.submit(work, job)
    except BrokenExecutor as broken:
        refused: Future[Done] = Future()
        refused.set_exception(broken)
        return refused


def _suspected(suspects: list[Job], alone: deque[Job], deaths: "Counter[str]", journal: Journal) -> Iterator[Done]:
    """Try the jobs of a dead worker again; one that was alone each time its worker died is given up at last."""
    if len(suspects) == 1:
        job = suspects[0]
        deaths[job.key] += 1
        if deaths[job.key] >= MOST_DEATHS:
            said = f"its worker died {MOST_DEATHS} times: out of memory, or a crash of a library"
            yield _noted(journal, Done(job.key, job.label, job.folder, FAULT, STATUS[FAULT], said))
            return
    alone.extend(suspects)


def _of_fault(job: Job, fault: BaseException) -> Done:
    return Done(job.key, job.label, job.folder, FAULT, STATUS[FAULT], fault_line(fault))


def _noted(journal: Journal, done: Done) -> Done:
    journal.end(done.key, done.code, done.status, done.said)
    return done


def _settle(parent: int) -> None:
    """In a worker: an interrupt is the parent's to handle, and a parent that was killed takes its workers along."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    threading.Thread(target=_end_with, args=(parent,), daemon=True).start()


def _end_with(parent: int) -> None:
    while os.getppid() == parent:
        time.sleep(_PARENT_LOOKS_S)
    os._exit(1)
