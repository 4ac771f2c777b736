"""A rig file whose runs are still to come."""

from collections.abc import Callable

from ...ident.errors import RequestError

_ABSENT = ("no such file", "this pattern matches no file")


def waits_for_runs(load: Callable[[], object], tell: Callable[[str], None]) -> None:
    """Load a rig file; when nothing is wrong but that its runs are not there yet, say so and go on.

    Parameters
    ----------
    load : callable
    tell : callable

    Raises
    ------
    RequestError
        For anything else.
    """
    try:
        load()
    except RequestError as error:
        if error.what in _ABSENT:
            tell(f"waiting for {error.found} of {error.where}")
            return
        raise
