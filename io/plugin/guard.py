"""A block whose faults never reach the host program: they are kept, and told later."""

import traceback
from types import TracebackType
from typing import Self


class Guard:
    """Keeps what is raised inside its block, interrupts of the whole program aside.

    The host of a plug-in is an acquisition that holds an actuator: an exception that we let out would stop it where it
    stands. So nothing is let out, and nothing is lost either.

    Attributes
    ----------
    faults : list of str
        One traceback each, oldest first, the last hundred at most.

    Examples
    --------
    >>> guard = Guard()
    >>> with guard:
    ...     1 / 0
    >>> guard.faults[0].splitlines()[-1]
    'ZeroDivisionError: division by zero'
    """

    MOST = 100

    def __init__(self) -> None:
        self.faults: list[str] = []

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, value: BaseException | None, trace: TracebackType | None
    ) -> bool:
        if value is None or not isinstance(value, Exception):
            return False
        self.faults.append("".join(traceback.format_exception(value)))
        del self.faults[: -self.MOST]
        return True
