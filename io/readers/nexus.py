"""NeXus: where an NXlog group keeps its values and its own clock; for open HDF5 objects, inside the child process."""

from collections.abc import Callable
from typing import Any


def is_log(group: Any) -> bool:
    """Whether a group is an NXlog: by its class, or by holding a value and a time."""
    kind = group.attrs.get("NX_class", b"")
    name = kind.decode("latin-1") if isinstance(kind, bytes) else str(kind)
    return "value" in group and (name.strip("\x00 ") == "NXlog" or (not name and "time" in group))


def value_of(group: Any, follow: Callable[[str], Any]) -> Any:
    """The dataset with the values of an NXlog."""
    return follow(group.name.rstrip("/") + "/value")


def clock_of(dataset: Any, follow: Callable[[str], Any]) -> Any | None:
    """The time dataset beside the value of an NXlog; None for any other dataset."""
    parent, _, name = dataset.name.rpartition("/")
    group = dataset.parent
    if name != "value" or "time" not in group or not is_log(group):
        return None
    return follow(parent + "/time")


def clock_scale(dataset: Any) -> float:
    """What a raw clock value is to be multiplied with, 1 where nothing is said."""
    if dataset.name.rpartition("/")[2] != "time":
        return 1.0
    scale = dataset.attrs.get("scaling_factor")
    return 1.0 if scale is None else float(getattr(scale, "flat", [scale])[0])
