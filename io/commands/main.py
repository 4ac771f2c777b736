"""The command `gainwright`: finds the sub-command, and turns each way of ending into its exit code."""

import atexit
import errno
import gc
import importlib
import os
import signal
import sys
from collections.abc import Sequence
from types import TracebackType
from typing import Any

import click

from ...ident.errors import GainwrightError, RecordError, RequestError

_THREADS = ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS", "VECLIB_MAXIMUM_THREADS")
_COMMANDS = ("process", "inspect", "retune", "recheck", "draft", "watch", "batch", "schema")

RELEASED, FAULT, WRONG_CALL, HELD, BAD_RECORD, INTERRUPTED = 0, 1, 2, 3, 4, 130


class LazyGroup(click.Group):
    """Loads a sub-command's file when it is asked for; those files import nothing heavy at their top."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        """In the order of a working day."""
        return list(_COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        """The command of that name, from the file of that name."""
        if cmd_name not in _COMMANDS:
            return None
        command = getattr(importlib.import_module(f"..{cmd_name}", __name__), cmd_name)
        assert isinstance(command, click.Command)
        return command

    def invoke(self, ctx: click.Context) -> Any:
        """Run the sub-command, and see its output out: a reader that is gone and a full disk are no faults of ours."""
        try:
            code = super().invoke(ctx)
            sys.stdout.flush()
        except OSError as problem:
            if problem.errno not in (errno.EPIPE, errno.ENOSPC, errno.EDQUOT):
                raise
            _drop_output()
            if problem.errno == errno.EPIPE:
                raise click.Abort from problem
            raise _full(problem) from problem
        return code


@click.group(cls=LazyGroup, context_settings={"help_option_names": ["-h", "--help"]})
@click.option("-v", "--verbose", is_flag=True, help="Show the whole traceback of a fault.")
@click.version_option(package_name="gainwright", prog_name="gainwright")
def gainwright(verbose: bool) -> None:
    """From the logs of a rig to controller gains that can be trusted on the hardware.

    \b
    Exit codes: 0 released (inspect: usable), 3 done but held, 2 the call or the rig file is
    wrong, 4 a log can't be used, 1 a fault of the program itself, 130 interrupted.
    """
    if not verbose:
        sys.excepthook = _one_line


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command line; the return value is the exit code.

    A fault of the program itself is not caught: Python ends with code 1, after one line (with -v: the traceback).

    Parameters
    ----------
    arguments : sequence of str or None
        None takes those of the process.
    """
    for name in _THREADS:  # before numpy is imported: small matrices, and several jobs may share the machine
        os.environ.setdefault(name, "1")
    if arguments is None:  # a process of its own: to be told to end is an interrupt, which leaves nothing half-done
        signal.signal(signal.SIGTERM, signal.default_int_handler)
        atexit.register(gc.freeze)  # what is left needs no last search for cycles: half a second after a job
    try:
        code = gainwright.main(args=arguments, prog_name="gainwright", standalone_mode=False)
    except (click.Abort, KeyboardInterrupt):
        print("interrupted", file=sys.stderr)
        return INTERRUPTED
    except click.ClickException as error:
        error.show()
        return WRONG_CALL
    except RequestError as error:
        return _tell(error, WRONG_CALL)
    except RecordError as error:
        return _tell(error, BAD_RECORD)
    except GainwrightError as error:  # neither the person's nor the record's doing, and yet in words
        return _tell(error, FAULT)
    return code if isinstance(code, int) else RELEASED


def _tell(error: GainwrightError, code: int) -> int:
    print(error.text, file=sys.stderr)
    return code


def _drop_output() -> None:
    """What still waits to be written goes nowhere, or the interpreter would stumble over it at its end."""
    try:
        nowhere = os.open(os.devnull, os.O_WRONLY)
        os.dup2(nowhere, sys.stdout.fileno())
        os.close(nowhere)
    except (OSError, ValueError, AttributeError):
        return  # no stream of the system's own


def _full(problem: OSError) -> RequestError:
    return RequestError(
        "something can't be written",
        where=str(problem.filename or "the output"),
        found=problem.strerror or str(problem),
        expected="room for what is written",
        advice="free some, or send the output elsewhere",
    )


def _one_line(kind: type[BaseException], fault: BaseException, trace: TracebackType | None) -> None:
    print(
        f"a fault of the program itself: {kind.__name__}: {fault}\n"
        "  next:     run `gainwright -v ...` again for the traceback, and report it with the rig file",
        file=sys.stderr,
    )
