"""Progress on the error stream: a moving line on a terminal, plain stage lines anywhere else."""

import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager
from typing import Protocol, TextIO


class Progress(Protocol):
    """What the stages call: the stage in words, and how much of it is done (0 to 1) where that is known."""

    def __call__(self, stage: str, share: float | None = None) -> None: ...


def silent(stage: str, share: float | None = None) -> None:
    """Say nothing: for calls from a program."""


class StageLines:
    """One line when a stage begins, with the seconds since the start; shares are not shown."""

    def __init__(self, stream: TextIO) -> None:
        self._stream = stream
        self._begin = time.monotonic()
        self._stage = ""

    def __call__(self, stage: str, share: float | None = None) -> None:
        if stage != self._stage:
            self._stage = stage
            print(f"[{time.monotonic() - self._begin:5.1f} s] {stage}", file=self._stream, flush=True)


@contextmanager
def shown_progress(stream: TextIO | None = None) -> Iterator[Progress]:
    """Progress for a person: moving where `stream` is a terminal, plain lines where it is a file or a pipe.

    Parameters
    ----------
    stream : text stream or None
        None is the error stream, so that the output stream carries the answer only.
    """
    stream = sys.stderr if stream is None else stream
    if not stream.isatty():
        yield StageLines(stream)
        return
    from rich.console import Console
    from rich.progress import BarColumn, SpinnerColumn, TextColumn, TimeElapsedColumn
    from rich.progress import Progress as Moving

    columns = (SpinnerColumn(), TimeElapsedColumn(), BarColumn(bar_width=24), TextColumn("{task.description}"))
    with Moving(*columns, console=Console(file=stream), transient=True, refresh_per_second=5) as moving:
        task = moving.add_task("starting", total=None)

        def show(stage: str, share: float | None = None) -> None:
            moving.update(task, description=stage, total=None if share is None else 1.0, completed=share or 0.0)

        yield show
