"""What runs in the second process: loads the libraries, then does one piece of work after another."""

import gc
import importlib
import os
import pickle
import sys
from types import TracebackType
from typing import IO, Any


def serve(hear: IO[bytes], answer: IO[bytes]) -> None:
    """Answer each (function, arguments) with a tuple of its result, until the input ends."""
    _send(answer, None)
    while True:
        try:
            work, given = pickle.load(hear)
        except EOFError:
            return
        _send(answer, (work(*given),))


def _send(answer: IO[bytes], value: Any) -> None:
    packed = pickle.dumps(value, protocol=5)  # whole before the first byte goes
    answer.write(packed)
    answer.flush()


def _load() -> None:
    """Import what the work needs and draw a picture for nobody: fonts and styles are looked up the first time only."""
    for name in ("design.selection", "design.search.drive", "io.report.page"):
        importlib.import_module(f"gainwright.{name}")
    from ..design.designed import Selection
    from .figures.gain_ribbon import gain_ribbon
    from .figures.svg import inline_svg

    inline_svg(gain_ribbon(Selection(1.0, "1", -1.0 + 0j, 0.0, -1.0 + 0j, ((0.5, 2.0),), (), ())), "none", "none")


def _silent(kind: type[BaseException], fault: BaseException, trace: TracebackType | None) -> None:
    """Say nothing."""


def main() -> None:
    """Talk over the two pipes; whatever a library prints goes to the error stream.

    A fault ends this process without a word: the work is done again in the first process, and the fault shows there.
    """
    sys.excepthook = _silent
    gc.set_threshold(100_000, 50, 50)
    answer = os.fdopen(os.dup(1), "wb")
    os.dup2(2, 1)
    _load()
    serve(sys.stdin.buffer, answer)


if __name__ == "__main__":
    main()
