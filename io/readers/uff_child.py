"""The child process that opens universal files: `python -m gainwright.io.readers.uff_child`.

Only time responses of dataset 58 are channels. A channel is named by its first line of identification, or by its
response (entity, node and direction) where that says nothing; where two have one name, by "name #number".
"""

from collections import Counter
from typing import Any

from .answering import Answer, Refused, numbers, serve, unit_of

TIME_RESPONSE = 1
TIME = 17  # as specific data type of the abscissa
_NOTHING = {"", "NONE", "None"}


def main() -> None:
    """Answer one request."""
    serve(_Sets, "universal")


class _Sets:
    """The time responses of one file."""

    def __init__(self, request: dict[str, Any]) -> None:
        _require_whole(request["file"])
        import pyuff

        file = pyuff.UFF(request["file"])
        kinds = [int(kind) for kind in file.get_set_types()]
        sets = [file.read_sets(number) for number, kind in enumerate(kinds) if kind == 58]
        self._sets = [each for each in sets if int(each["func_type"]) == TIME_RESPONSE]
        if not self._sets:
            raise Refused(
                "this universal file holds no time response",
                found=f"sets of type {', '.join(map(str, kinds)) or 'none'}",
                expected="dataset 58 with function type 1",
            )
        bare = [_name(each) for each in self._sets]
        often, seen = Counter(bare), Counter[str]()
        self._names = []
        for name in bare:
            seen[name] += 1
            self._names.append(name if often[name] == 1 else f"{name} #{seen[name]}")

    def channels(self) -> list[dict[str, Any]]:
        """Every time response; a channel can also be named by its number among them."""
        return [
            {"name": name, "aliases": [str(number)], "unit": _label(each, "ordinate"), "samples": len(each["data"])}
            for number, (name, each) in enumerate(zip(self._names, self._sets, strict=True), 1)
        ]

    def read(self, source: str, most: int) -> Answer:
        """One time response with its time."""
        named = {str(number): each for number, each in enumerate(self._sets, 1)}
        found = dict(zip(self._names, self._sets, strict=True)).get(source) or named.get(source)
        if found is None:
            raise Refused("", missing=source)
        import numpy as np

        if int(found["abscissa_spec_data_type"]) not in (0, TIME):
            raise Refused("this set does not run in time", found=f"{source}: {found['abscissa_axis_units_lab']}")
        data = np.asarray(found["data"])
        if 8 * data.size > most:
            raise Refused("the log is too large to be read at once", found=f"{data.size} samples in {source}")
        values, texts = numbers(data, source)
        stamps, _ = numbers(np.asarray(found["x"]), source)
        unit = _label(found, "ordinate")
        head = {"samples": len(values), "unit": unit, "texts": texts, "clock": len(stamps)}
        return {**head, "clock_unit": _label(found, "abscissa") or "s"}, [values.tobytes(), stamps.tobytes()]


def _name(found: dict[str, Any]) -> str:
    name = str(found.get("id1", "")).strip()
    if name not in _NOTHING:
        return name
    entity = str(found.get("rsp_ent_name", "")).strip()
    entity = "" if entity in _NOTHING else f"{entity} "
    return f"{entity}node {int(found['rsp_node'])} direction {int(found['rsp_dir'])}"


def _label(found: dict[str, Any], axis: str) -> str | None:
    label = unit_of(found.get(f"{axis}_axis_units_lab"))
    return None if label in _NOTHING else label


def _require_whole(path: str) -> None:
    """Every set ends with -1: one that doesn't was cut off, and the library would leave it out unsaid."""
    with open(path, "rb") as file:
        file.seek(0, 2)
        file.seek(max(0, file.tell() - 200))
        whole = file.read().rstrip().endswith(b"    -1")  # binary samples run right up to it, without a line end
    if not whole:
        raise Refused(
            "this universal file was cut off", found="no -1 at its end", advice="copy the file again once it is closed"
        )


if __name__ == "__main__":
    main()
