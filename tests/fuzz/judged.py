"""One call of the command line with hostile input, bounded in time and memory, and what is wrong with how it ended."""

import contextlib
import io
import os
import resource
import signal
import traceback
import warnings
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path
from types import FrameType

from gainwright.io.commands.main import main

SECONDS = 10.0  # of processor time for one call on an input of some kB
MEMORY = 3 * 2**30  # bytes above what the process held at its start
GOOD = (0, 3)
REFUSED = (2, 4)


class Hang(BaseException):
    """Raised by the clock inside a call that doesn't end; no handler of the program catches it."""


@dataclass(frozen=True)
class Fault:
    """What is wrong with one call.

    Attributes
    ----------
    key : str
        The same for the same fault: kind and place, not the input.
    text : str
        All that is known.
    """

    key: str
    text: str


@dataclass(frozen=True)
class Verdict:
    """How one call ended: its exit code (1 for a fault of the program) and its fault, None where there is none."""

    code: int
    fault: Fault | None = None


def judge(arguments: Sequence[str], shown: str) -> Verdict:
    """Run `gainwright` in this process.

    Parameters
    ----------
    arguments : sequence of str
        As on the command line.
    shown : str
        What a refusal has to name: the log or the rig file.
    """
    said, complained = io.StringIO(), io.StringIO()
    try:
        with contextlib.redirect_stdout(said), contextlib.redirect_stderr(complained), warnings.catch_warnings():
            warnings.simplefilter("default")
            with _processor_time(SECONDS):
                code = main(arguments)
    except KeyboardInterrupt:
        raise
    except BaseException as escaped:  # noqa: BLE001 - the judge wants every one of them
        return Verdict(1, Fault(_place(escaped), "".join(traceback.format_exception(escaped))))
    return Verdict(code, _wrong_words(code, said.getvalue(), complained.getvalue(), shown))


def _wrong_words(code: int, said: str, complained: str, shown: str) -> Fault | None:
    """A refusal is one error that names its place; a success doesn't complain; nothing shows a traceback."""
    if code not in (*GOOD, *REFUSED):
        return Fault(f"exit {code}", complained)
    if "Traceback" in said + complained:
        return Fault("a traceback is shown", said + complained)
    if "Warning:" in complained:
        return Fault("a warning of a library: " + complained.split("Warning:")[1][:60], complained)
    if code in REFUSED and "!" not in said and (shown not in complained or not complained.strip()):
        return Fault("a refusal that names no place: " + complained[:60], complained)
    return None


def _place(escaped: BaseException) -> str:
    ours = [f for f in traceback.extract_tb(escaped.__traceback__) if "/fuzz/" not in f.filename]
    inner = [f for f in ours if any(f"/{room}/" in f.filename for room in ("io", "ident", "design"))] or ours
    at = f"{Path(inner[-1].filename).name}:{inner[-1].name}" if inner else "nowhere"
    return f"{type(escaped).__name__} in {at}" if not isinstance(escaped, Hang) else f"hang in {at}"


@contextlib.contextmanager
def _processor_time(seconds: float) -> Iterator[None]:
    """A bound that a busy machine doesn't reach earlier."""

    def ring(number: int, frame: FrameType | None) -> None:
        raise Hang(f"no end after {seconds:g} s of processor time")

    before = signal.signal(signal.SIGVTALRM, ring)
    signal.setitimer(signal.ITIMER_VIRTUAL, seconds)
    try:
        yield
    finally:
        signal.setitimer(signal.ITIMER_VIRTUAL, 0.0)
        signal.signal(signal.SIGVTALRM, before)


def bound_memory() -> None:
    """Bound the address space of this process from here on: more is a MemoryError, and a fault."""
    pages = int(Path("/proc/self/statm").read_text().split()[0])
    most = pages * os.sysconf("SC_PAGE_SIZE") + MEMORY
    resource.setrlimit(resource.RLIMIT_AS, (most, resource.getrlimit(resource.RLIMIT_AS)[1]))


def held_megabytes() -> float:
    """What this process holds in memory now, MB."""
    return int(Path("/proc/self/statm").read_text().split()[1]) * os.sysconf("SC_PAGE_SIZE") / 1e6
