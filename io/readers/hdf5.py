"""HDF5 logs: per-channel datasets, tables with named fields, columns of a matrix, NXlog groups.

A source is the path of a dataset, of an NXlog group, or of a column: "table/field" for a field of a table, "data/1" for
the first column of a matrix. The file is opened in a child process (see `hdf5_child`), never here.
"""

from dataclasses import replace
from pathlib import Path

from .port import ChannelInfo, Hints, missing_source
from .through_child import ChunkedChildReader

_SIGNATURE = b"\x89HDF\r\n\x1a\n"


class Hdf5Reader(ChunkedChildReader):
    """Reader of HDF5 logs."""

    name = "HDF5"
    suffixes = (".h5", ".hdf5", ".hdf", ".he5", ".nxs", ".nx", ".nx5")
    child = "gainwright.io.readers.hdf5_child"

    def recognises(self, head: bytes) -> bool:
        """By the format's signature at 0, 512, 1024, 2048 ... bytes."""
        places = [0, *[512 * 2**power for power in range(7)]]
        return any(head[place : place + 8] == _SIGNATURE for place in places)

    def channels(self, file: Path, hints: Hints) -> tuple[ChannelInfo, ...]:
        """Every dataset that can be a channel; names are relative to the run's group."""
        return tuple(replace(info, aliases=_aliases(info)) for info in super().channels(file, hints))

    def _missing(self, file: Path, missing: str, sources: list[str] | None, hints: Hints) -> Exception:
        if sources is None or (hints.group and missing.strip("/") == hints.group.strip("/")):
            infos = self.channels(file, Hints())
            return missing_source(file, missing, sorted({info.name.rpartition("/")[0] or "/" for info in infos}))
        return super()._missing(file, missing, sources, hints)


def _aliases(info: ChannelInfo) -> tuple[str, ...]:
    plain = info.name.strip("/")
    return tuple(dict.fromkeys([plain, "/" + plain, *info.aliases]))
