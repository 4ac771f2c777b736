"""Work that may be done aside while this process goes on, or here, once its result is wanted."""

from collections.abc import Callable
from typing import Generic, Protocol, TypeVar

Result = TypeVar("Result")
Given = TypeVar("Given", covariant=True)


class Pending(Protocol[Given]):
    """A result that may not be there yet."""

    def result(self) -> Given:
        """Wait for the work, or do it here; a fault of the work is raised."""

    def busy(self) -> bool:
        """Whether the work is being done aside at this moment: who asks for its result now has to wait."""

    def drop(self) -> None:
        """The result is not wanted any more: what has not begun is left undone."""


class Aside(Protocol):
    """Where work can be handed to.

    The work is a function of a module, its arguments are values that nobody changes. Wherever it is done, its result is
    the same to the last bit.
    """

    def start(self, work: Callable[..., Result], *given: object) -> Pending[Result]:
        """Hand work over."""


class Later(Generic[Result]):
    """Work that is done here when its result is first asked for."""

    def __init__(self, work: Callable[..., Result], given: tuple[object, ...]) -> None:
        self._work, self._given = work, given
        self._done: tuple[Result] | None = None

    def result(self) -> Result:
        """The result; the work is done once."""
        if self._done is None:
            self._done = (self._work(*self._given),)
        return self._done[0]

    def busy(self) -> bool:
        """Never."""
        return False

    def drop(self) -> None:
        """Nothing has begun."""


class Here:
    """Nothing stands aside: every work is done here when its result is asked for, and not at all if it never is."""

    def start(self, work: Callable[..., Result], *given: object) -> Pending[Result]:
        """Remember the work."""
        return Later(work, given)


HERE = Here()
