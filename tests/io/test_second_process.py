"""Work done in the second process: the same result, faults that show, and no process left behind."""

import operator
import os
import signal
import subprocess
import sys
import time

import numpy as np
import pytest
from gainwright.design.aside import HERE
from gainwright.design.design import begin_design
from gainwright.design.requirements import ControllerSetting, Limits, Requirement, Requirements
from gainwright.ident.fitted import Plausible
from gainwright.ident.plant import Plant
from gainwright.io import second_process as room
from gainwright.io.second_process import SecondProcess, second_process


@pytest.fixture(scope="module")
def second():
    """One process for the whole file: it loads the libraries first."""
    process = SecondProcess()
    yield process
    process.close()


def there(process: SecondProcess, work, *given):
    """Work handed over, once it has been done there."""
    task = process.start(work, *given)
    assert task._settled.wait(60.0)
    return task


def test_work_is_done_there_and_comes_back_to_the_last_bit(second: SecondProcess) -> None:
    """An array of numbers with all their digits, in the order of the questions."""
    numbers = np.random.default_rng(3).normal(size=1000)
    assert there(second, os.getpid).result() == second._child.pid
    first, last = (there(second, np.multiply, numbers, factor) for factor in (1.0 / 3.0, np.pi))
    assert np.array_equal(first.result(), numbers * (1.0 / 3.0))
    assert np.array_equal(last.result(), numbers * np.pi)
    assert first.result() is first.result()


def test_what_has_not_begun_is_done_here(second: SecondProcess) -> None:
    """The other process is busy: who asks for a result needn't wait for it."""
    there(second, os.getpid)
    busy = second.start(time.sleep, 1.0)
    assert second.start(os.getpid).result() == os.getpid()
    assert busy.result() is None


def test_a_fault_there_shows_here_as_itself(capfd) -> None:
    """The kind of the fault and its words are those that the work raises, once, and what follows is done here."""
    process = SecondProcess()
    try:
        there(process, os.getpid)
        task = there(process, operator.truediv, 1, 0)
        with pytest.raises(ZeroDivisionError, match="division by zero"):
            task.result()
        assert process.start(os.getpid).result() == os.getpid()
    finally:
        process.close()
    assert capfd.readouterr().err == ""


def test_what_a_dying_process_leaves_is_done_here() -> None:
    """Killed in the middle of its work, with more of it waiting."""
    process = SecondProcess()
    try:
        there(process, os.getpid)
        begun, waiting = process.start(sum, range(20_000_000)), process.start(sorted, [4, 3])
        time.sleep(0.1)
        os.kill(process._child.pid, signal.SIGKILL)
        assert begun.result() == 10_000_000 * 19_999_999
        assert waiting.result() == [3, 4]
        assert process.start(sorted, [6, 5]).result() == [5, 6]
    finally:
        process.close()


def test_work_that_does_not_fit_through_the_pipe_is_done_here() -> None:
    """A function without a name can't be sent."""
    process = SecondProcess()
    try:
        assert there(process, lambda: 7).result() == 7
    finally:
        process.close()


def test_it_ends_with_the_first_process_however_that_ends() -> None:
    """Killed without a word: the pipe closes, and nobody is left."""
    script = (
        "import os, time\n"
        "from gainwright.io.second_process import SecondProcess\n"
        "process = SecondProcess()\n"
        "print(process._child.pid, flush=True)\n"
        "time.sleep(60)\n"
    )
    first = subprocess.Popen([sys.executable, "-P", "-c", script], stdout=subprocess.PIPE, text=True)
    assert first.stdout is not None
    pid = int(first.stdout.readline())
    first.kill()
    first.wait()
    first.stdout.close()
    end = time.monotonic() + 60.0
    while alive(pid):
        assert time.monotonic() < end
        time.sleep(0.05)


def alive(pid: int) -> bool:
    """Whether a process runs; one that has ended and waits to be counted does not."""
    try:
        with open(f"/proc/{pid}/stat") as stat:
            return stat.read().rsplit(")", 1)[1].split()[0] != "Z"
    except OSError:
        return False


@pytest.mark.parametrize("cores", [1, 2])
def test_a_machine_with_one_core_gets_none(cores: int, monkeypatch) -> None:
    """There, two processes would only get into each other's way."""
    monkeypatch.setattr(room, "_cores", lambda: cores)
    with second_process() as aside:
        assert (aside is HERE) == (cores == 1)


def test_a_design_is_the_same_to_the_last_bit_with_and_without_it(second: SecondProcess) -> None:
    """An offset that P can't avoid: several structures are searched, and here two at a time."""
    rng = np.random.default_rng(5)
    scatter = np.exp(0.05 * rng.standard_normal((60, 3)))
    plants = tuple(Plant((2.0 * g,), (0.5 * t, 1.0), 0.1 * d) for g, t, d in scatter)
    asked = (
        Requirement("settling_time", 1.2, "at_most", "s", band=0.02),
        Requirement("overshoot", 0.1, "at_most", "%", 100.0),
        Requirement("steady_state_error", 0.01, "at_most", "%", 100.0),
    )

    def designed(aside):
        return begin_design(
            Plant((2.0,), (0.5, 1.0), 0.1), Plausible(plants, np.zeros(60), np.zeros(60)),
            operating_command=0.0, operating_response=0.0, noise=None, requirements=Requirements(asked, 2.0),
            limits=Limits(-10.0, 10.0, np.inf, -40.0, 40.0, np.inf), setting=ControllerSetting(0.02, 0.002),
            command_unit="V", response_unit="mm", aside=aside,
        ).finished()  # fmt: skip

    there(second, os.getpid)
    both, alone = designed(second), designed(HERE)
    assert len(alone.tried) > 2
    assert both.gains == alone.gains
    assert both.selection == alone.selection
    assert both.tried == alone.tried
