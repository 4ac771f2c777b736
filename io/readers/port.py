"""The port of log readers: what any reader, built in or from outside, has to offer."""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Protocol, runtime_checkable

from ...ident.errors import RequestError
from ...ident.run import FloatArray
from ..record import Finding
from ..rigfile.messages import listed, nearest
from ..rigfile.rig import LogDialect


@dataclass(frozen=True)
class Hints:
    """What the rig file says about the logs; a reader uses what applies to its format.

    Attributes
    ----------
    dialect : LogDialect
        Of text logs.
    group : str or None
        Prefix of the sources inside a tree-like file.
    """

    dialect: LogDialect = field(default_factory=LogDialect)
    group: str | None = None


@dataclass(frozen=True)
class ChannelInfo:
    """One channel of a log, not read yet.

    Attributes
    ----------
    name : str
        What a rig file writes as `source`.
    unit : str or None
        As the log states it.
    samples : int or None
        None where that isn't known without reading.
    aliases : tuple of str
        Other ways to write the source: with the unit in brackets, by the column's number.
    """

    name: str
    unit: str | None = None
    samples: int | None = None
    aliases: tuple[str, ...] = ()


@dataclass(frozen=True, eq=False)
class Channel:
    """One channel as read.

    Attributes
    ----------
    name : str
    values : (n,) array, in `unit`
        NaN where the log has no number.
    unit : str or None
        As the log states it.
    clock : (n,) array or None, s
        The channel's own time, where the format keeps one for each channel.
    stamps : bool
        The values were made from date or clock texts and are seconds, whatever the rig file says.
    """

    name: str
    values: FloatArray
    unit: str | None = None
    clock: FloatArray | None = None
    stamps: bool = False


@dataclass(frozen=True, eq=False)
class Log:
    """What was read from one file.

    Attributes
    ----------
    channels : dict of source to Channel
        Keyed by the source as it was asked for; all of one length.
    findings : tuple of Finding
        What was mended on the way, with the place.
    """

    channels: dict[str, Channel]
    findings: tuple[Finding, ...] = ()


@runtime_checkable
class Reader(Protocol):
    """A reader of one format. It opens files for reading only and changes none.

    Attributes
    ----------
    name : str
        For messages.
    suffixes : tuple of str
        Lower case with the dot; looked at only when no reader recognises the content.
    """

    name: str
    suffixes: tuple[str, ...]

    def recognises(self, head: bytes) -> bool:
        """Whether a file that starts with these bytes (up to 64 KiB) is of this format."""
        ...

    def channels(self, file: Path, hints: Hints) -> tuple[ChannelInfo, ...]:
        """The channels of a log.

        Raises
        ------
        RecordError
            When the file can't be read.
        """
        ...

    def read(self, file: Path, sources: Sequence[str], hints: Hints) -> Log:
        """Read the named channels.

        Raises
        ------
        RecordError
            When the file can't be read.
        RequestError
            When a source isn't in it; `missing_source` words it.
        """
        ...


@runtime_checkable
class ChunkedReader(Reader, Protocol):
    """A reader that can also read part by part, for logs larger than memory. It need not be one."""

    def rows(self, file: Path, sources: Sequence[str], hints: Hints) -> int:
        """About how many samples the longest of these channels has, told without reading them all.

        Raises
        ------
        RecordError, RequestError
            As `read`.
        """
        ...

    def chunks(self, file: Path, sources: Sequence[str], hints: Hints, rows: int) -> Iterator[Log]:
        """The named channels in order, about `rows` samples at a time; stamps go on from part to part.

        Raises
        ------
        RecordError, RequestError
            As `read`.
        """
        ...


def find_channel(file: Path, source: str, infos: Sequence[ChannelInfo]) -> ChannelInfo:
    """The channel that a source names.

    Raises
    ------
    RequestError
        When none does, or two do.
    """
    named = [info for info in infos if info.name == source] or [info for info in infos if source in info.aliases]
    if not named:
        raise missing_source(file, source, [info.name for info in infos])
    if len(named) > 1:
        numbers = [str(number) for number, info in enumerate(infos, 1) if info in named]
        raise RequestError(
            "two channels of this log have the same name",
            where=str(file),
            found=f'"{source}" as channels {" and ".join(numbers)}',
            expected="one channel",
            advice=f'name the channel by its number, such as source = "{numbers[0]}"',
        )
    return named[0]


def missing_source(file: Path, source: str, names: Sequence[str]) -> RequestError:
    """The error for a source that isn't in the log, with the nearest one."""
    return RequestError(
        "this source is not in the log",
        where=str(file),
        found=f'"{source}"',
        expected=f"one of {listed(names)}" if names else "a log with channels",
        advice=nearest(source, names),
    )
