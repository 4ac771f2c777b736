"""The child's side of reading a log: one bounded request on the input, the answer on the output.

Nothing but the standard library is imported here. An answer is one line of JSON, then the float64 bytes of each array.
A log that is read in chunks is answered by several of these, each line telling how many bytes follow.
"""

import contextlib
import json
import sys
from collections.abc import Callable, Iterable, Iterator, Sequence
from typing import Any, BinaryIO, Protocol, runtime_checkable

Answer = tuple[dict[str, Any], list[bytes]]


class Refused(Exception):  # noqa: N818 - crosses the process as data, not as an error
    """What the parent is to say."""

    def __init__(self, what: str, **parts: Any) -> None:
        super().__init__(what)
        self.parts = {"what": what, **parts}


class Opened(Protocol):
    """One open log in the child."""

    def channels(self) -> list[dict[str, Any]]:
        """Everything that can be named as a source: name, aliases, unit, samples."""
        ...

    def read(self, source: str, most: int) -> Answer:
        """One channel whole: its head (samples, unit, texts, clock, clock_unit), its values and its own clock."""
        ...


@runtime_checkable
class OpenedInChunks(Opened, Protocol):
    """One that can be read part by part."""

    def chunks(self, sources: Sequence[str], rows: int) -> Iterator[Answer]:
        """First the heads of the channels, cut to the shortest, then `rows` samples of all of them at a time."""
        ...


def serve(open_log: Callable[[dict[str, Any]], Opened], kind: str) -> None:
    """Answer the one request that is on the input.

    Parameters
    ----------
    open_log : callable
        Makes the open log out of the request.
    kind : str
        Of the file, for messages.
    """
    request = json.load(sys.stdin)
    _bound(int(request["memory"]), int(request["seconds"]))
    output = sys.stdout.buffer
    sys.stdout = sys.stderr  # a library that prints must not print into the answer
    try:
        for head, blobs in _answers(open_log, request):
            _write(output, head, blobs)
    except Refused as refused:
        _write(output, {"refused": refused.parts}, [])
    except MemoryError:
        _write(output, {"refused": {"what": "the log needs more memory than is allowed"}}, [])
    except (OSError, RuntimeError, LookupError, ValueError, TypeError, ArithmeticError) as problem:
        found = str(problem)[:300] or type(problem).__name__
        _write(output, {"refused": {"what": f"the {kind} file can't be read", "found": found}}, [])


def _answers(open_log: Callable[[dict[str, Any]], Opened], request: dict[str, Any]) -> Iterable[Answer]:
    log = open_log(request)
    sources = request["sources"]
    if sources is None:
        yield {"channels": log.channels()}, []
    elif request.get("rows") and isinstance(log, OpenedInChunks):
        yield from log.chunks(sources, int(request["rows"]))
    else:
        parts = [log.read(source, int(request["memory"]) // 16) for source in sources]
        yield {"channels": [head for head, _ in parts]}, [blob for _, blobs in parts for blob in blobs]


def _write(output: BinaryIO, head: dict[str, Any], blobs: Sequence[bytes]) -> None:
    output.write(json.dumps({**head, "bytes": sum(map(len, blobs))}).encode() + b"\n")
    for blob in blobs:
        output.write(blob)
    output.flush()


def _bound(memory: int, seconds: int) -> None:
    """Bound this process, where the system can."""
    with contextlib.suppress(ImportError, ValueError, OSError):
        import resource

        resource.setrlimit(resource.RLIMIT_AS, (memory, memory))
        resource.setrlimit(resource.RLIMIT_CPU, (seconds, seconds + 1))


def text_of(item: Any) -> str:
    """A text in any of the forms in which files keep one; bytes that are no UTF-8 are read as latin-1."""
    if isinstance(item, bytes):
        try:
            return item.decode("utf-8")
        except UnicodeDecodeError:
            return item.decode("latin-1")
    text = str(item)
    surrogates = any("\ud800" <= sign <= "\udfff" for sign in text)
    return text.encode("utf-8", "surrogateescape").decode("latin-1" if surrogates else "utf-8")


def unit_of(item: Any) -> str | None:
    """A unit as a file states it, without the padding; None where it states none."""
    return None if item is None else text_of(item).strip("\x00 \t\r\n") or None


def numbers(raw: Any, name: str, first: Any = None, last: Any = None) -> tuple[Any, list[str] | None]:
    """(n,) float64 array, or the texts of stamps with an empty array.

    Parameters
    ----------
    raw : (n,) array of any kind
    name : str
        Of the channel, for messages.
    first, last : optional
        First and last value of the whole channel, where `raw` is a part of it.

    Raises
    ------
    Refused
        When they are neither numbers nor texts.
    """
    import numpy as np

    if raw.dtype.kind in "SOU":
        return np.empty(0), [text_of(item) for item in raw]
    if raw.dtype.kind not in "fiub":
        raise Refused("this channel holds no numbers", found=f"{name} of {raw.dtype}", expected="numbers")
    if raw.dtype.kind in "iu" and raw.size:
        first, last = (raw[0] if first is None else first), (raw[-1] if last is None else last)
        if max(abs(int(first)), abs(int(last))) > 2**53:
            raw = raw - first  # only a stamp in ns is that large; float64 would round it
    return raw.astype(np.float64), None
