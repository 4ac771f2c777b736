"""ASAM MDF logs: groups of channels, each with its own time; through asammdf, in a child process."""

from .through_child import ChunkedChildReader


class MdfReader(ChunkedChildReader):
    """Reader of ASAM MDF 4 logs (and of version 3)."""

    name = "ASAM MDF"
    suffixes = (".mf4", ".mdf")
    child = "gainwright.io.readers.mdf_child"
    library = "asammdf"
    extra = "mdf"

    def recognises(self, head: bytes) -> bool:
        """By the mark in front, whether the file was closed or not."""
        return head.startswith((b"MDF     ", b"UnFinMF "))
