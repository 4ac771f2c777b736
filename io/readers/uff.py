"""Universal file format, dataset 58: time responses, one set a channel; through pyuff, in a child process."""

from .through_child import ChildReader


class UffReader(ChildReader):
    """Reader of universal files."""

    name = "universal file format 58"
    suffixes = (".uff", ".unv", ".uf")
    child = "gainwright.io.readers.uff_child"
    library = "pyuff"
    extra = "uff"

    def recognises(self, head: bytes) -> bool:
        """A line with -1 in columns 5 and 6, then one that begins with the number of a set."""
        lines = head[:400].replace(b"\r\n", b"\n").lstrip(b"\n").split(b"\n")
        return len(lines) > 1 and lines[0].rstrip() == b"    -1" and lines[1][:6].strip().isdigit()
