"""A log may be deleted, moved or lose its share at any moment, also while it is read."""

from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from ...ident.errors import RecordError


@contextmanager
def still_there(file: Path) -> Iterator[None]:
    """Turn what the system refuses while a log is read into the error that names the log.

    Parameters
    ----------
    file : Path

    Raises
    ------
    RecordError
        When the system refuses.

    Examples
    --------
    >>> with still_there(Path("gone.csv")):
    ...     Path("gone.csv").stat()
    Traceback (most recent call last):
        ...
    gainwright.ident.errors.RecordError: gone.csv: the log went away while it was read
      found:    No such file or directory
      expected: a log that stays where it is until the job is done
      next:     run it again once the log is there
    """
    try:
        yield
    except OSError as problem:
        gone = not file.exists()
        raise RecordError(
            "the log went away while it was read" if gone else "the system refused to go on reading the log",
            where=str(file),
            found=problem.strerror or str(problem),
            expected="a log that stays where it is until the job is done",
            advice="run it again once the log is there" if gone else "look at the disk or share that holds it",
        ) from problem
