"""The child process that opens ASAM MDF files: `python -m gainwright.io.readers.mdf_child`.

A channel is named as in the file; where two groups have one of the same name, by "group/name" with the number of the
group from 1. The time of a group is its master channel; each channel brings it along.
"""

from collections import Counter
from collections.abc import Iterator, Sequence
from typing import Any, NamedTuple

from .answering import Answer, Refused, numbers, serve, unit_of


class _Place(NamedTuple):
    group: int
    channel: int
    name: str
    master: bool


def main() -> None:
    """Answer one request."""
    serve(_Measurement, "MDF")


class _Measurement:
    """One open file."""

    def __init__(self, request: dict[str, Any]) -> None:
        from asammdf import MDF

        with open(request["file"], "rb") as file:
            if file.read(8) == b"UnFinMF ":
                raise Refused("the MDF file was not closed", advice="let the logger finish it, or finish a copy")
        self._file = MDF(request["file"])
        masters = self._file.masters_db
        self._places = [
            _Place(group, index, str(channel.name), masters.get(group) == index)
            for group, held in enumerate(self._file.groups)
            for index, channel in enumerate(held.channels)
        ]
        self._times = Counter(place.name for place in self._places)

    def channels(self) -> list[dict[str, Any]]:
        """Every channel of every group."""
        return [
            {
                "name": self._shown(place),
                "aliases": self._aliases(place),
                "unit": self._unit(place),
                "samples": self._count(place),
            }
            for place in self._places
        ]

    def _shown(self, place: _Place) -> str:
        return place.name if self._times[place.name] == 1 else f"{place.group + 1}/{place.name}"

    def _aliases(self, place: _Place) -> list[str]:
        return [f"{place.group + 1}/{place.name}"] if self._times[place.name] == 1 else []

    def _unit(self, place: _Place) -> str | None:
        channel = self._file.groups[place.group].channels[place.channel]
        converted = getattr(channel.conversion, "unit", None) if channel.conversion is not None else None
        return unit_of(channel.unit or converted)

    def read(self, source: str, most: int) -> Answer:
        """One channel in physical values, with the time of its group."""
        place = self._find(source)
        count = self._count(place)
        if 8 * count > most:
            raise Refused("the log is too large to be read at once", found=f"{count} samples in {source}")
        texts, blobs = self._part(place, 0, count)
        clock = 0 if place.master else count
        unit = self._unit(place)
        return {"samples": count, "unit": unit, "texts": texts, "clock": clock, "clock_unit": "s"}, blobs

    def chunks(self, sources: Sequence[str], rows: int) -> Iterator[Answer]:
        """The heads of the channels first, then `rows` samples of all of them at a time, up to the shortest."""
        places = [self._find(source) for source in sources]
        lengths = {source: self._count(place) for source, place in zip(sources, places, strict=True)}
        heads = [{"unit": self._unit(place), "clock": not place.master, "clock_unit": "s"} for place in places]
        yield {"lengths": lengths, "channels": heads}, []
        shortest = min(lengths.values())
        for start in range(0, shortest, rows):
            read = [self._part(place, start, min(rows, shortest - start)) for place in places]
            yield {"texts": [texts for texts, _ in read]}, [blob for _, blobs in read for blob in blobs]

    def _find(self, source: str) -> _Place:
        named = [place for place in self._places if source in (self._shown(place), *self._aliases(place))]
        if not named:
            raise Refused("", missing=source)
        if len(named) > 1:
            raise Refused("two channels of one group have the same name", found=source, expected="one of that name")
        return named[0]

    def _count(self, place: _Place) -> int:
        return int(self._file.groups[place.group].channel_group.cycles_nr)

    def _part(self, place: _Place, start: int, count: int) -> tuple[list[str] | None, list[bytes]]:
        """The texts of some samples or None, and the bytes of their values and times."""
        signal = self._file.get(
            group=place.group,
            index=place.channel,
            ignore_invalidation_bits=True,
            record_offset=start,
            record_count=count,
        )
        if signal.samples.ndim != 1:
            raise Refused("this channel is not one number a sample", found=f"{place.name} of {signal.samples.dtype}")
        values, texts = numbers(signal.samples, place.name)
        lost = signal.invalidation_bits
        if lost is not None and len(values):
            values[lost.astype(bool)] = float("nan")
        blobs = [values.tobytes()]
        return texts, blobs if place.master else [*blobs, signal.timestamps.astype("float64").tobytes()]


if __name__ == "__main__":
    main()
