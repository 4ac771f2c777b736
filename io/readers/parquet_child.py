"""The child process that opens Parquet files: `python -m gainwright.io.readers.parquet_child`.

The unit of a column is the metadata `unit` or `units` of its field. Date columns become ns from their first value.
"""

from collections.abc import Iterator, Sequence
from typing import Any

from .answering import Answer, Refused, numbers, serve, unit_of

_UNITS = (b"unit", b"units", b"Unit", b"Units")


def main() -> None:
    """Answer one request."""
    serve(_Table, "Parquet")


class _Table:
    """One open file."""

    def __init__(self, request: dict[str, Any]) -> None:
        import pyarrow.parquet

        self._file = pyarrow.parquet.ParquetFile(request["file"])
        self._fields = {field.name: field for field in self._file.schema_arrow}
        self._count = int(self._file.metadata.num_rows)

    def channels(self) -> list[dict[str, Any]]:
        """The columns of numbers, dates and texts."""
        places = {name: str(number) for number, name in enumerate(self._fields, 1)}
        return [
            {
                "name": name,
                "aliases": [] if places[name] in self._fields else [places[name]],
                "unit": self._unit(name),
                "samples": self._count,
            }
            for name, field in self._fields.items()
            if _is_flat(field.type)
        ]

    def read(self, source: str, most: int) -> Answer:
        """One column."""
        if 8 * self._count > most:
            raise Refused("the log is too large to be read at once", found=f"{self._count} rows in {source}")
        name = self._named(source)
        values, texts = self._values(name, self._file.read(columns=[name], use_threads=False).column(0))
        head = {"samples": len(values), "unit": self._unit(name), "texts": texts, "clock": 0}
        return head, [values.tobytes()]

    def chunks(self, sources: Sequence[str], rows: int) -> Iterator[Answer]:
        """Row group by row group, `rows` at most at a time."""
        names = [self._named(source) for source in sources]
        heads = [{"unit": self._unit(name), "clock": False, "clock_unit": None} for name in names]
        yield {"lengths": dict.fromkeys(sources, self._count), "channels": heads}, []
        self._firsts = {name: self._first(name) for name in names}
        for batch in self._file.iter_batches(batch_size=rows, columns=list(dict.fromkeys(names)), use_threads=False):
            read = [self._values(name, batch.column(batch.schema.get_field_index(name))) for name in names]
            yield {"texts": [texts for _, texts in read]}, [values.tobytes() for values, _ in read]

    def _first(self, name: str) -> Any:
        batch = next(self._file.iter_batches(batch_size=1, columns=[name]), None)
        return None if batch is None else batch.column(0)

    def _named(self, source: str) -> str:
        names = list(self._fields)
        name = source if source in self._fields else None
        if name is None and source.isdigit() and 1 <= int(source) <= len(names):
            name = names[int(source) - 1]
        if name is None:
            raise Refused("", missing=source)
        if not _is_flat(self._fields[name].type):
            raise Refused("this column is not one channel", found=f"{name} of {self._fields[name].type}")
        return name

    def _unit(self, name: str) -> str | None:
        import pyarrow

        if pyarrow.types.is_timestamp(self._fields[name].type):
            return "ns"
        kept = self._fields[name].metadata or {}
        return next((unit_of(kept[key]) for key in _UNITS if key in kept), None)

    def _values(self, name: str, column: Any) -> tuple[Any, list[str] | None]:
        """(n,) float64 array with NaN for nulls, or texts."""
        import pyarrow

        first = getattr(self, "_firsts", {}).get(name)
        if pyarrow.types.is_timestamp(column.type):
            column = column.cast(pyarrow.timestamp("ns"), safe=False).cast(pyarrow.int64())
            first = None if first is None else first.cast(pyarrow.timestamp("ns"), safe=False).cast(pyarrow.int64())
        if pyarrow.types.is_string(column.type) or pyarrow.types.is_large_string(column.type):
            return numbers(_array(column.fill_null("")).astype(str), name)
        if column.null_count or pyarrow.types.is_boolean(column.type) or pyarrow.types.is_decimal(column.type):
            column = column.cast(pyarrow.float64())
        array = _array(column)
        return numbers(array, name, None if first is None or first.null_count else _array(first)[0])


def _array(column: Any) -> Any:
    import numpy as np

    return np.asarray(column.to_numpy() if hasattr(column, "chunks") else column.to_numpy(zero_copy_only=False))


def _is_flat(kind: Any) -> bool:
    from pyarrow import types

    looks = (types.is_integer, types.is_floating, types.is_boolean, types.is_decimal, types.is_timestamp)
    return any(look(kind) for look in (*looks, types.is_string, types.is_large_string))


if __name__ == "__main__":
    main()
