"""HDF5 logs: per-channel datasets, tables with named fields, columns of a matrix, NXlog groups.

A source is the path of a dataset, of an NXlog group, or of a column: "table/field" for a field of a table, "data/1" for
the first column of a matrix. The file is opened in a child process (see `hdf5_child`), never here.
"""

from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np

from ...ident.errors import RecordError
from ...ident.run import FloatArray
from .. import units
from ..record import Finding
from .child import ask_child
from .port import Channel, ChannelInfo, Hints, Log, missing_source
from .stamps import seconds_of

_SIGNATURE = b"\x89HDF\r\n\x1a\n"
_CHILD = "gainwright.io.readers.hdf5_child"


class Hdf5Reader:
    """Reader of HDF5 logs."""

    name = "HDF5"
    suffixes = (".h5", ".hdf5", ".hdf", ".he5", ".nxs", ".nx", ".nx5")

    def recognises(self, head: bytes) -> bool:
        """By the format's signature at 0, 512, 1024, 2048 ... bytes."""
        places = [0, *[512 * 2**power for power in range(7)]]
        return any(head[place : place + 8] == _SIGNATURE for place in places)

    def channels(self, file: Path, hints: Hints) -> tuple[ChannelInfo, ...]:
        """Every dataset that can be a channel; names are relative to the run's group."""
        head, _ = _ask(file, None, hints)
        return tuple(
            ChannelInfo(item["name"], item["unit"], item["samples"], _aliases(item)) for item in head["channels"]
        )

    def read(self, file: Path, sources: Sequence[str], hints: Hints) -> Log:
        """Read the named channels as float64, cut to the shortest."""
        wanted = list(dict.fromkeys(sources))
        head, body = _ask(file, wanted, hints)
        channels = _unpack(file, wanted, head["channels"], body)
        return _cut(channels, file)


def _aliases(item: dict[str, Any]) -> tuple[str, ...]:
    plain = item["name"].strip("/")
    return tuple(dict.fromkeys([plain, "/" + plain, *item["aliases"]]))


def _ask(file: Path, sources: list[str] | None, hints: Hints) -> tuple[Any, bytes]:
    request = {"file": str(file.resolve()), "group": hints.group, "sources": sources}
    head, body = ask_child(_CHILD, request, str(file))
    refused = head.get("refused")
    if refused is None:
        return head, body
    if "missing" in refused:
        raise _missing(file, refused["missing"], sources, hints)
    parts = {name: refused.get(name, "") for name in ("found", "expected", "advice")}
    raise RecordError(refused["what"], where=str(file), **parts)


def _missing(file: Path, missing: str, sources: list[str] | None, hints: Hints) -> Exception:
    if sources is None or (hints.group and missing.strip("/") == hints.group.strip("/")):
        top = ask_child(_CHILD, {"file": str(file.resolve()), "group": None, "sources": None}, str(file))[0]
        groups = sorted({item["name"].rpartition("/")[0] or "/" for item in top.get("channels", [])})
        return missing_source(file, missing, groups)
    names = [info.name for info in Hdf5Reader().channels(file, hints)]
    return missing_source(file, missing, names)


def _unpack(file: Path, sources: list[str], heads: list[dict[str, Any]], body: bytes) -> dict[str, Channel]:
    channels: dict[str, Channel] = {}
    place = 0
    for source, head in zip(sources, heads, strict=True):
        values, place = _take(body, place, head["samples"])
        clock = None
        if head["clock"]:
            clock, place = _take(body, place, head["clock"])
            clock = clock * _seconds(head["clock_unit"])
        if head["texts"] is not None:
            stamps = seconds_of(head["texts"], f"{file}, {source}", 1)
            channels[source] = Channel(source, stamps, "s", stamps=True)
        else:
            channels[source] = Channel(source, _finite(values), head["unit"], clock)
    return channels


def _take(body: bytes, place: int, samples: int) -> tuple[FloatArray, int]:
    end = place + 8 * samples
    return np.frombuffer(body[place:end], dtype=np.float64).copy(), end


def _seconds(unit: str | None) -> float:
    return 1.0 if unit is None else units.difference_factor(unit, "s")


def _finite(values: FloatArray) -> FloatArray:
    return np.where(np.isfinite(values), values, np.nan)


def _cut(channels: dict[str, Channel], file: Path) -> Log:
    lengths = {source: len(channel.values) for source, channel in channels.items()}
    shortest = min(lengths.values())
    if shortest == 0:
        raise RecordError("a channel of this log is empty", where=str(file), found=f"{lengths}", expected="samples")
    if len(set(lengths.values())) == 1:
        return Log(channels)
    finding = Finding(
        "channels of unequal length",
        f"after sample {shortest}",
        ", ".join(f"{source}: {length}" for source, length in lengths.items()),
        "cut to the shortest",
    )
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
    return Log(cut, (finding,))
