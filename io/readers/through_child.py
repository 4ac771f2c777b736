"""Readers of files that a foreign library parses: always in a bounded child process, never here."""

import importlib.util
from collections.abc import Iterator, Sequence
from pathlib import Path
from typing import Any, ClassVar

import numpy as np

from ...ident.errors import RecordError
from ...ident.run import FloatArray
from .. import units
from ..record import Finding
from .child import ask_child, stream_child
from .port import Channel, ChannelInfo, Hints, Log, find_channel, missing_source
from .stamps import Stamps, seconds_of


class MissingLibraryError(RecordError):
    """The log may be sound, and its reader is here, but not the library that parses it."""


class ChildReader:
    """A reader whose file is opened in a child process.

    Attributes
    ----------
    name, suffixes
        As the port has them.
    child : str
        The module that is run.
    library, extra : str or None
        What has to be installed for it, and the extra that brings it.
    """

    name = ""
    suffixes: tuple[str, ...] = ()
    child: ClassVar[str]
    library: ClassVar[str | None] = None
    extra: ClassVar[str | None] = None

    def channels(self, file: Path, hints: Hints) -> tuple[ChannelInfo, ...]:
        """Everything in the file that can be a channel."""
        head, _ = self._ask(file, None, hints)
        return tuple(
            ChannelInfo(item["name"], item["unit"], item["samples"], tuple(item["aliases"]))
            for item in head["channels"]
        )

    def read(self, file: Path, sources: Sequence[str], hints: Hints) -> Log:
        """Read the named channels as float64, cut to the shortest."""
        wanted = list(dict.fromkeys(sources))
        head, body = self._ask(file, wanted, hints)
        channels: dict[str, Channel] = {}
        place = 0
        for source, part in zip(wanted, head["channels"], strict=True):
            stamps = None if part["texts"] is None else seconds_of(part["texts"], f"{file}, {source}", 1)
            channels[source], place = _unpack(source, part, stamps, body, place, part["samples"], part["clock"])
        return _cut(channels, file)

    def _request(self, file: Path, sources: list[str] | None, hints: Hints) -> dict[str, Any]:
        if self.library is not None and importlib.util.find_spec(self.library) is None:
            raise MissingLibraryError(
                f"this log needs the library {self.library}, which is not installed",
                where=str(file),
                found=self.name,
                expected=f"the extra {self.extra}",
                advice=f"pip install 'gainwright[{self.extra}]'",
            )
        return {"file": str(file.resolve()), "group": hints.group, "sources": sources}

    def _ask(self, file: Path, sources: list[str] | None, hints: Hints) -> tuple[Any, bytes]:
        head, body = ask_child(self.child, self._request(file, sources, hints), str(file))
        self._raise_refused(file, head, sources, hints)
        return head, body

    def _raise_refused(self, file: Path, head: dict[str, Any], sources: list[str] | None, hints: Hints) -> None:
        refused = head.get("refused")
        if refused is None:
            return
        if "missing" in refused:
            raise self._missing(file, refused["missing"], sources, hints)
        parts = {name: refused.get(name, "") for name in ("found", "expected", "advice")}
        raise RecordError(refused["what"], where=str(file), **parts)

    def _missing(self, file: Path, missing: str, sources: list[str] | None, hints: Hints) -> Exception:
        return missing_source(file, missing, [info.name for info in self.channels(file, hints)])


class ChunkedChildReader(ChildReader):
    """One whose files can be read part by part."""

    def rows(self, file: Path, sources: Sequence[str], hints: Hints) -> int:
        """Samples of the longest of these channels, told without reading them."""
        infos = self.channels(file, hints)
        return max((find_channel(file, source, infos).samples or 0 for source in sources), default=0)

    def chunks(self, file: Path, sources: Sequence[str], hints: Hints, rows: int) -> Iterator[Log]:
        """The named channels, `rows` samples at a time."""
        wanted = list(dict.fromkeys(sources))
        request = self._request(file, wanted, hints) | {"rows": rows}
        heads: list[dict[str, Any]] = []
        clocks = {source: Stamps(f"{file}, {source}") for source in wanted}
        findings: tuple[Finding, ...] = ()
        for head, body in stream_child(self.child, request, str(file)):
            self._raise_refused(file, head, wanted, hints)
            if "channels" in head:
                heads, findings = head["channels"], _unequal(head["lengths"], file)
                continue
            channels: dict[str, Channel] = {}
            place = 0
            arrays = sum(1 + bool(part["clock"]) for part in heads) - sum(texts is not None for texts in head["texts"])
            count = len(body) // (8 * arrays) if arrays else 0
            for source, part, texts in zip(wanted, heads, head["texts"], strict=True):
                stamps = None if texts is None else clocks[source].seconds(texts)
                own = 0 if stamps is not None else count
                clock = count if part["clock"] else 0
                channels[source], place = _unpack(source, part, stamps, body, place, own, clock)
            yield Log(channels, findings)
            findings = ()


def _unpack(
    source: str, part: dict[str, Any], stamps: FloatArray | None, body: bytes, place: int, samples: int, clocked: int
) -> tuple[Channel, int]:
    """One channel out of the bytes from `place` on, and where the next one begins."""
    values, place = _take(body, place, samples)
    clock = None
    if clocked:
        clock, place = _take(body, place, clocked)
        with np.errstate(over="ignore"):
            clock = clock * _seconds(part["clock_unit"])
        clock = np.where(np.isfinite(clock), clock, np.nan)
    if stamps is not None:
        return Channel(source, stamps, "s", stamps=True), place
    return Channel(source, np.where(np.isfinite(values), values, np.nan), part["unit"], clock), place


def _take(body: bytes, place: int, samples: int) -> tuple[FloatArray, int]:
    end = place + 8 * samples
    return np.frombuffer(body[place:end], dtype=np.float64).copy(), end


def _seconds(unit: str | None) -> float:
    return 1.0 if unit is None else units.difference_factor(unit, "s")


def _unequal(lengths: dict[str, int], file: Path) -> tuple[Finding, ...]:
    """What is said of channels that don't end together.

    Raises
    ------
    RecordError
        When one is empty.
    """
    shortest = min(lengths.values())
    if shortest == 0:
        raise RecordError("a channel of this log is empty", where=str(file), found=f"{lengths}", expected="samples")
    if len(set(lengths.values())) == 1:
        return ()
    return (
        Finding(
            "channels of unequal length",
            f"after sample {shortest}",
            ", ".join(f"{source}: {length}" for source, length in lengths.items()),
            "cut to the shortest",
        ),
    )


def _cut(channels: dict[str, Channel], file: Path) -> Log:
    lengths = {source: len(channel.values) for source, channel in channels.items()}
    findings = _unequal(lengths, file)
    shortest = min(lengths.values())
    cut = {
        source: Channel(
            channel.name,
            channel.values[:shortest],
            channel.unit,
            None if channel.clock is None else channel.clock[:shortest],
            channel.stamps,
        )
        for source, channel in channels.items()
    }
    return Log(cut, findings)
