"""Parquet logs: one column a channel, its unit in the field's metadata; through pyarrow, in a child process."""

from .through_child import ChunkedChildReader


class ParquetReader(ChunkedChildReader):
    """Reader of Parquet logs."""

    name = "Parquet"
    suffixes = (".parquet", ".pq")
    child = "gainwright.io.readers.parquet_child"
    library = "pyarrow"
    extra = "parquet"

    def recognises(self, head: bytes) -> bool:
        """By the mark in front."""
        return head.startswith(b"PAR1")
