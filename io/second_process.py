"""A second process of this program that takes work off the first one's hands, where the machine has a core for it."""

import os
import pickle
import subprocess
import sys
import threading
from collections import deque
from collections.abc import Callable, Iterator
from contextlib import contextmanager, suppress
from typing import IO, Any, Generic, TypeVar

from ..design.aside import HERE, Aside, Pending

Result = TypeVar("Result")

_CHILD = f"{__package__}.second_process_child"


class _Task(Generic[Result]):
    """One piece of work: waiting until it is sent or taken back, then answered or lost."""

    def __init__(self, owner: "SecondProcess", work: Callable[..., Result], given: tuple[object, ...]) -> None:
        self.work, self.given = work, given
        self._owner = owner
        self._settled = threading.Event()
        self._answer: tuple[Result] | None = None

    def settle(self, answer: tuple[Result] | None) -> None:
        """Keep what came back; None: nothing did."""
        self._answer = answer
        self._settled.set()

    def result(self) -> Result:
        """The result from there; what the other process has not begun, or did not bring to an end, is done here."""
        if not self._owner.take_back(self):
            self._settled.wait()
        if self._answer is None:
            self._answer = (self.work(*self.given),)
        return self._answer[0]

    def busy(self) -> bool:
        """Whether the other process has begun and not ended it."""
        return not self._settled.is_set() and not self._owner.holds(self)

    def drop(self) -> None:
        """Not wanted any more: it is not sent, if it is still waiting."""
        self._owner.take_back(self)


class SecondProcess:
    """The process and the pipes to it.

    Notes
    -----
    Work is lost when the other process dies; a fault of the work ends it, too. What is lost is done again here: the
    result is the same, and a fault shows where faults show. The process ends with this one, however this one ends:
    its input is a pipe that closes then.
    """

    def __init__(self) -> None:
        self._waiting: deque[_Task[Any]] = deque()
        self._change = threading.Condition()
        self._over = False
        self._child = subprocess.Popen(
            [sys.executable, "-P", "-m", _CHILD],
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            start_new_session=True,  # a Control-C is the first process's business
        )
        self._thread = threading.Thread(target=self._serve, name="second process", daemon=True)
        self._thread.start()

    def start(self, work: Callable[..., Result], *given: object) -> Pending[Result]:
        """Hand work over; it begins as soon as the other process is ready and free."""
        task = _Task(self, work, given)
        with self._change:
            if self._over:
                task.settle(None)
            else:
                self._waiting.append(task)
                self._change.notify()
        return task

    def holds(self, task: _Task[Any]) -> bool:
        """Whether the task is still waiting."""
        with self._change:
            return task in self._waiting

    def take_back(self, task: _Task[Any]) -> bool:
        """Whether the task was still waiting; it is not sent any more then."""
        with self._change:
            if task not in self._waiting:
                return False
            self._waiting.remove(task)
            return True

    def close(self) -> None:
        """End the other process, whatever it is doing."""
        with self._change:
            self._over = True
            self._change.notify()
        self._child.kill()
        self._thread.join()
        self._child.wait()
        for pipe in (self._child.stdin, self._child.stdout):
            if pipe is not None:
                with suppress(OSError):  # what is left in it is for nobody
                    pipe.close()

    def _serve(self) -> None:
        assert self._child.stdin is not None
        assert self._child.stdout is not None
        try:
            self._converse(self._child.stdin, self._child.stdout)
        finally:
            with self._change:
                self._over = True
                left = list(self._waiting)
                self._waiting.clear()
            for task in left:
                task.settle(None)

    def _converse(self, ask: IO[bytes], hear: IO[bytes]) -> None:
        try:
            pickle.load(hear)  # it says that it is ready
        except (OSError, EOFError, pickle.UnpicklingError):
            return  # it never came up
        while (task := self._next()) is not None:
            answer = None
            try:
                pickle.dump((task.work, task.given), ask, protocol=5)
                ask.flush()
                answer = pickle.load(hear)
            except (OSError, EOFError, pickle.PickleError, AttributeError, TypeError):
                return  # it is gone, or the talk is out of step: the rest is done here
            finally:
                task.settle(answer)

    def _next(self) -> _Task[Any] | None:
        with self._change:
            self._change.wait_for(lambda: self._over or self._waiting)
            return None if self._over else self._waiting.popleft()


@contextmanager
def second_process() -> Iterator[Aside]:
    """A second process for the length of a block; on a machine with one core, or where none can be started, none."""
    try:
        process = SecondProcess() if _cores() > 1 else None
    except OSError:
        process = None  # no more processes to be had: the work is done here
    if process is None:
        yield HERE
        return
    try:
        yield process
    finally:
        process.close()


def _cores() -> int:
    """Cores that this process may run on."""
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1
