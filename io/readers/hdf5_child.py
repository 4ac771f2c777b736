"""The child process that opens HDF5 files: `python -m gainwright.io.readers.hdf5_child`, a request on its input.

It imports numpy and h5py only.
External links, raw external storage and virtual datasets over other files are refused: they would read any path of the
machine, and a missing source would read as zeros.
"""

import contextlib
from collections.abc import Iterator, Sequence
from typing import Any

from .answering import Answer, Refused, numbers, serve, text_of, unit_of

MOST_OBJECTS = 20000
MOST_COLUMNS = 256
MOST_LINKS = 16
_SUPERBLOCK_WITHIN = 4096  # bytes


def main() -> None:
    """Answer one request."""
    serve(lambda request: _Tree(_open(request["file"]), request["group"]), "HDF5")


def _open(path: str) -> Any:
    """Open for reading without a lock: a lock held here can make the writer lose its file."""
    import h5py

    try:
        return h5py.File(path, "r", locking=False)
    except OSError as problem:
        if _is_written_live(path):
            with contextlib.suppress(OSError):
                return h5py.File(path, "r", locking=False, swmr=True)
        advice = "copy the file again once it is closed"
        if "h5clear" in str(problem) or "already open" in str(problem):
            advice = "the writer did not close it: mend a copy with h5clear, never the log itself"
        raise Refused("the HDF5 file can't be opened", found=str(problem)[:300], advice=advice) from problem


def _is_written_live(path: str) -> bool:
    """Whether the superblock is marked by a SWMR writer: any other damaged file opened that way is read again and again
    for a minute, in the hope that its writer ends it (HDF5 file format specification, version 3 superblock)."""
    with open(path, "rb") as file:
        head = file.read(_SUPERBLOCK_WITHIN)
    places = [place for place in (0, 512, 1024, 2048) if head[place : place + 8] == b"\x89HDF\r\n\x1a\n"]
    return any(head[place + 8] >= 3 and head[place + 11] & 5 == 5 for place in places if len(head) > place + 11)


class _Tree:
    """One open file, seen from a group."""

    def __init__(self, file: Any, group: str | None) -> None:
        self._file = file
        self._base = "/" + (group or "").strip("/")
        if not isinstance(self.follow(self._base), type(file["/"])):
            raise Refused("this group is a dataset", found=self._base, expected="a group")

    def follow(self, path: str, links: int = 0) -> Any:
        """The object at an absolute path, every link on the way looked at before it is taken."""
        import h5py

        if links > MOST_LINKS:
            raise Refused("links go round in circles", found=path)
        here: Any = self._file["/"]
        parts = [part for part in path.split("/") if part]
        for number, part in enumerate(parts):
            link = here.get(part, getlink=True) if isinstance(here, h5py.Group) else None
            if link is None:
                raise Refused("", missing=path)
            if isinstance(link, h5py.ExternalLink):
                raise Refused(
                    "this log links to another file, which is not followed",
                    found=f"{path} -> {link.filename}",
                    expected="the samples in the file itself",
                    advice="copy them into one file",
                )
            if isinstance(link, h5py.SoftLink):
                base = "" if link.path.startswith("/") else here.name.rstrip("/") + "/"
                self._require_target(path, base + link.path, links + 1)
                return self.follow("/".join([base + link.path, *parts[number + 1 :]]), links + 1)
            here = here[part]
        return here

    def _require_target(self, path: str, target: str, links: int) -> None:
        try:
            self.follow(target, links)
        except Refused as refused:
            if "missing" not in refused.parts:
                raise
            raise Refused(
                "this log links to something that is not in it",
                found=f"{path} -> {target}",
                expected="the samples in the file itself",
                advice="let the logger write them, or name another source",
            ) from refused

    def channels(self) -> list[dict[str, Any]]:
        """Everything that can be named as a source, links left out."""
        found: list[dict[str, Any]] = []
        seen = 0

        def look(name: str, item: Any) -> bool | None:
            nonlocal seen
            seen += 1
            found.extend(self._listed(item))
            return True if seen > MOST_OBJECTS else None

        self.follow(self._base).visititems(look)
        return found

    def _listed(self, item: Any) -> list[dict[str, Any]]:
        import h5py

        from . import nexus

        if not isinstance(item, h5py.Dataset):
            return []
        names = [(self._shown(item.name), item.name)]
        if nexus.clock_of(item, self.follow) is not None:
            group = item.parent.name
            names.append((self._shown(group), group))
        if item.dtype.names is not None and item.ndim == 1:
            return [
                {
                    "name": f"{names[0][0]}/{field}",
                    "aliases": [f"{item.name}/{field}", f"{names[0][0]}:{field}"],
                    "unit": _unit(item, field),
                    "samples": item.shape[0],
                }
                for field in item.dtype.names
            ]
        if item.dtype.kind not in "fiubSO" or item.ndim == 0 or item.size < 2:
            return []
        if item.ndim == 2 and min(item.shape) > 1 and item.shape[1] <= MOST_COLUMNS:
            return [
                {
                    "name": f"{names[0][0]}/{column}",
                    "aliases": [f"{item.name}/{column}"],
                    "unit": _unit(item, None),
                    "samples": item.shape[0],
                }
                for column in range(1, item.shape[1] + 1)
            ]
        if max(item.shape) != item.size:
            return []
        aliases = [alias for name in names for alias in name][1:]
        return [{"name": names[0][0], "aliases": aliases, "unit": _unit(item, None), "samples": item.size}]

    def _shown(self, path: str) -> str:
        base = self._base.rstrip("/") + "/"
        return path.removeprefix(base) if self._base != "/" else path

    def read(self, source: str, most: int) -> tuple[dict[str, Any], list[bytes]]:
        """One channel: its head, and the bytes of its values and of its own clock."""
        from . import nexus

        dataset, field = self._find(source)
        _require_own_storage(dataset)
        _require_room(dataset, most)
        values, texts = numbers(_raw(dataset, field, slice(None)), dataset.name)
        head: dict[str, Any] = {"samples": len(values), "unit": _unit(dataset, field), "texts": texts, "clock": 0}
        blobs = [(values * nexus.clock_scale(dataset)).tobytes()]
        clock = nexus.clock_of(dataset, self.follow)
        if clock is not None:
            _require_own_storage(clock)
            _require_room(clock, most)
            stamps, _ = numbers(_raw(clock, None, slice(None)), clock.name)
            head.update(clock=len(stamps), clock_unit=_unit(clock, None))
            blobs.append((stamps * nexus.clock_scale(clock)).tobytes())
        return head, blobs

    def chunks(self, sources: Sequence[str], rows: int) -> Iterator[Answer]:
        """The heads of the channels first, then `rows` samples of all of them at a time, up to the shortest."""
        parts = [_Part(source, *self._find(source), self.follow) for source in sources]
        lengths = {part.source: part.length for part in parts}
        yield {"lengths": lengths, "channels": [part.head for part in parts]}, []
        shortest = min(lengths.values())
        for start in range(0, shortest, rows):
            read = [part.read(slice(start, min(start + rows, shortest))) for part in parts]
            yield {"texts": [texts for texts, _ in read]}, [blob for _, blobs in read for blob in blobs]

    def _find(self, source: str) -> tuple[Any, str | int | None]:
        """The dataset, and the field or column of it, that a source names."""
        path = (
            source if source.startswith(self._base) and source.startswith("/") else f"{self._base.rstrip('/')}/{source}"
        )
        try:
            return self._dataset(path), None
        except Refused as refused:
            if "missing" not in refused.parts:
                raise
        table, _, column = path.replace(":", "/").rpartition("/")
        try:
            dataset = self._dataset(table)
        except Refused as refused:
            parts = {**refused.parts, "missing": source} if "missing" in refused.parts else refused.parts
            raise Refused(**parts) from refused
        if dataset.dtype.names is not None and column in dataset.dtype.names:
            return dataset, column
        numbered = dataset.dtype.names is None and column.isdigit() and dataset.ndim == 2
        if numbered and 1 <= int(column) <= dataset.shape[1]:
            return dataset, int(column) - 1
        raise Refused("", missing=source)

    def _dataset(self, path: str) -> Any:
        import h5py

        from . import nexus

        item = self.follow(path)
        if isinstance(item, h5py.Group) and nexus.is_log(item):
            item = nexus.value_of(item, self.follow)
        if not isinstance(item, h5py.Dataset):
            raise Refused("", missing=path)
        return item


class _Part:
    """One channel that is read by slices."""

    def __init__(self, source: str, dataset: Any, field: str | int | None, follow: Any) -> None:
        from . import nexus

        self.source, self._dataset, self._field = source, dataset, field
        self._clock = nexus.clock_of(dataset, follow)
        self._scale = nexus.clock_scale(dataset)
        _require_own_storage(dataset)
        self.length = dataset.shape[0] if field is not None else dataset.size
        unit = None
        if self._clock is not None:
            _require_own_storage(self._clock)
            self.length = min(self.length, self._clock.size)
            unit = _unit(self._clock, None)
        self.head = {"unit": _unit(dataset, field), "clock": self._clock is not None, "clock_unit": unit}

    def read(self, rows: slice) -> tuple[list[str] | None, list[bytes]]:
        """The texts of stamps or None, and the bytes of values and clock."""
        from . import nexus

        values, texts = self._slice(self._dataset, self._field, rows)
        blobs = [(values * self._scale).tobytes()]
        if self._clock is not None:
            blobs.append((self._slice(self._clock, None, rows)[0] * nexus.clock_scale(self._clock)).tobytes())
        return texts, blobs

    def _slice(self, dataset: Any, field: str | int | None, rows: slice) -> tuple[Any, list[str] | None]:
        ends = [_raw(dataset, field, slice(place, place + 1))[0] for place in (0, self.length - 1)]
        return numbers(_raw(dataset, field, rows), dataset.name, *ends)


def _require_room(dataset: Any, most: int) -> None:
    width = dataset.dtype.itemsize * dataset.size
    if max(width, 8 * dataset.size) > most:
        raise Refused(
            "the log is too large to be read at once",
            found=f"{dataset.name}: {width / 1e9:.1f} GB",
            expected=f"at most {most / 1e9:.1f} GB",
        )


def _raw(dataset: Any, field: str | int | None, rows: slice) -> Any:
    """(n,) array of some samples of one channel, as stored."""
    if isinstance(field, str):
        return dataset.fields(field)[rows].reshape(-1)
    if field is not None:
        return dataset[rows, field]
    if dataset.ndim != 1 and dataset.size != max(dataset.shape, default=0):
        raise Refused(
            "this dataset is not one channel",
            found=f"{dataset.name} with shape {dataset.shape}",
            expected="one number a sample",
            advice='name a column, such as "data/1"',
        )
    if dataset.ndim == 1:
        return dataset[rows]
    long = dataset.shape.index(dataset.size) if dataset.ndim else 0
    return dataset[tuple(rows if axis == long else 0 for axis in range(dataset.ndim))].reshape(-1)


def _require_own_storage(dataset: Any) -> None:
    import h5py

    if dataset.external:
        raise Refused(
            "this dataset keeps its samples in another file, which is not followed",
            found=dataset.name,
            expected="the samples in the file itself",
        )
    if dataset.is_virtual:
        others = {source.file_name for source in dataset.virtual_sources()} - {"."}
        if others:
            raise Refused(
                "this dataset is put together from other files, which are not followed",
                found=f"{dataset.name} <- {', '.join(sorted(others))}",
                expected="the samples in the file itself",
                advice="copy them into one file",
            )
    filters = dataset.id.get_create_plist()
    for number in range(filters.get_nfilters()):
        code, _, _, name = filters.get_filter(number)
        if not h5py.h5z.filter_avail(code):
            raise Refused(
                "a compression filter is missing",
                found=f"{dataset.name} needs {text_of(name)} ({code})",
                advice="write the log again without it, or with gzip",
            )


def _unit(dataset: Any, field: str | int | None) -> str | None:
    """The unit that a dataset states, in any of the odd forms that loggers write."""
    names = ["units", "unit", "Units", "Unit", "UNITS", "UNIT"]
    if isinstance(field, str):
        names = [f"{field}{joint}{name}" for name in names[:2] for joint in ("_", ".", " ", ":")] + names
    for name in names:
        if name in dataset.attrs:
            return _attribute(dataset, name, field)
    return None


def _attribute(dataset: Any, name: str, field: str | int | None) -> str | None:
    try:
        value = dataset.attrs[name]
    except (OSError, UnicodeDecodeError, ValueError, TypeError):
        return None
    if type(value).__name__ == "Empty":
        return None
    items = list(value.reshape(-1)) if hasattr(value, "reshape") else [value]
    place = 0
    if len(items) > 1 and isinstance(field, str):
        place = list(dataset.dtype.names).index(field)
    elif len(items) > 1 and isinstance(field, int):
        place = field
    if place >= len(items):
        return None
    return unit_of(items[place])


if __name__ == "__main__":
    main()
