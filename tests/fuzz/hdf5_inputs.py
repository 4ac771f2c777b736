"""HDF5 logs for the fuzzer: odd but valid trees, and files whose bytes are spoilt. Invented throughout."""

import contextlib
import io
import random
from typing import Any

import h5py
import numpy as np

NAMES = ["t", "u", "y", "time", "value", "a", "a b", "ü", "1", "x:y", "-", "data"]
UNITS: list[Any] = [
    "s",
    "mm",
    "V",
    b"mm\x00\x00",
    "",
    " ",
    "ns",
    "?",
    3,
    2.5,
    np.array([b"s", b"V"]),
    np.array([], "S1"),
    "µs",
    b"\xff\xfe",
    [1, 2],
]
SHAPES = [(12,), (12,), (12,), (1,), (0,), (2,), (12, 1), (1, 12), (12, 3), (3, 12), (2, 2, 3), (), (300,), (0, 3)]
KINDS = ["f8", "f4", "f2", "i8", "u8", "i1", "u1", "?", "S5", "c16", "i2", ">f8", ">i4"]


def sound(dice: random.Random) -> bytes:
    """A tree of datasets, tables, NXlog groups, links and virtual datasets."""
    content = io.BytesIO()
    with h5py.File(
        content, "w", libver=dice.choice(("earliest", "latest", "v110")), userblock_size=dice.choice((0, 0, 512))
    ) as file:
        for _ in range(dice.choice((1, 2, 3, 3, 6))):
            with contextlib.suppress(
                ValueError, TypeError, OSError, RuntimeError, LookupError
            ):  # such a thing can't be made; the next one
                dice.choice(_PARTS)(file if dice.random() < 0.7 else file.require_group("g/h"), dice)
    return content.getvalue()


def spoil(content: bytes, dice: random.Random) -> bytes:
    """Bytes changed, mostly where the tree is described; cut, or with a hole."""
    if dice.random() < 0.1:
        return content[: dice.randrange(len(content) + 1)]
    changed = bytearray(content)
    if dice.random() < 0.1 and changed:
        start = dice.randrange(len(changed))
        changed[start : start + 200] = bytes(len(changed[start : start + 200]))
    for _ in range(dice.choice((1, 1, 2, 4, 16, 64))):
        place = dice.randrange(min(len(changed), dice.choice((64, 512, 4096, len(changed))))) if changed else 0
        if changed:
            changed[place] = dice.choice(
                (0, 255, 1, 127, 128, changed[place] ^ (1 << dice.randrange(8)), dice.randrange(256))
            )
    return bytes(changed)


def _values(dice: random.Random, kind: str, shape: tuple[int, ...]) -> np.ndarray:
    count = int(np.prod(shape))
    with np.errstate(all="ignore"):
        raw = np.arange(count) * dice.choice((1.0, 0.01, -1.0, 1e300, 0.0)) + dice.choice(
            (0.0, 1.7e9, 1e18, np.nan, np.inf)
        )
        if kind.startswith("S"):
            return np.array([b"%d" % number for number in range(count)], kind).reshape(shape)
        whole = kind.strip("<>")[0] in "iu"
        return (np.nan_to_num(raw) if whole else raw).astype(kind).reshape(shape)


def _attributes(item: Any, dice: random.Random) -> None:
    for name in dice.choices(
        ["units", "unit", "UNITS", "scaling_factor", "start", "NX_class", "u_units"], k=dice.choice((0, 1, 2))
    ):
        item.attrs[name] = dice.choice(UNITS)


def _dataset(group: Any, dice: random.Random) -> None:
    shape = dice.choice(SHAPES)
    more: dict[str, Any] = {}
    if len(shape) == 1 and shape[0] > 1 and dice.random() < 0.4:
        more = {
            "chunks": (dice.choice((1, 5, 12)),),
            "maxshape": (None,),
            "compression": dice.choice((None, "gzip", "lzf")),
        }
        more |= {"shuffle": dice.random() < 0.3, "fletcher32": dice.random() < 0.3}
    _attributes(group.create_dataset(dice.choice(NAMES), data=_values(dice, dice.choice(KINDS), shape), **more), dice)


def _declared_huge(group: Any, dice: random.Random) -> None:
    """No bytes are written, and yet it says that it is long."""
    shape = dice.choice([(2**40,), (2**62,), (2**31, 2), (2**20, 257), (10**6, 10**6)])
    _attributes(
        group.create_dataset(dice.choice(NAMES), shape, dice.choice(("f8", "i1")), chunks=True, fillvalue=1), dice
    )


def _table(group: Any, dice: random.Random) -> None:
    fields = [(name, dice.choice(KINDS)) for name in dice.sample(NAMES, dice.choice((1, 3)))]
    if dice.random() < 0.2:
        fields.append(("sub", [("a", "f8"), ("b", "f4", (2,))]))  # type: ignore[arg-type]
    _attributes(group.create_dataset(dice.choice(NAMES), data=np.zeros(dice.choice((0, 2, 12)), fields)), dice)


def _texts(group: Any, dice: random.Random) -> None:
    texts = dice.choice(
        (["12:00:00", "12:00:01"], ["2026-11-03T12:00:00", ""], ["x", "ü"], ["", ""], ["2026-11-03T12:00:00", "nat"])
    )
    group.create_dataset(dice.choice(NAMES), data=texts, dtype=h5py.string_dtype(dice.choice(("utf-8", "ascii"))))


def _odd_kind(group: Any, dice: random.Random) -> None:
    kind = dice.choice(
        (
            h5py.ref_dtype,
            h5py.vlen_dtype("f8"),
            h5py.enum_dtype({"ON": 1}),
            np.dtype(("f8", (3,))),
            h5py.opaque_dtype("M8[us]"),
        )
    )
    group.create_dataset(dice.choice(NAMES), (dice.choice((1, 12)),), kind)


def _nexus(group: Any, dice: random.Random) -> None:
    log = group.require_group(dice.choice(("log", "time", "t")))
    if dice.random() < 0.7:
        log.attrs["NX_class"] = dice.choice(("NXlog", b"NXlog", "NXentry", 5, [b"NXlog"]))
    for name in dice.sample(["value", "time", "average_value"], 2):
        item = log.create_dataset(name, data=_values(dice, dice.choice(KINDS), dice.choice(SHAPES)))
        _attributes(item, dice)


def _link(group: Any, dice: random.Random) -> None:
    group[dice.choice(NAMES)] = dice.choice(
        (
            h5py.SoftLink(dice.choice(("/", "/t", "nowhere", ".", "..", "/g/h/a", "/a", "a/b/c"))),
            h5py.ExternalLink(dice.choice(("other.h5", "/etc/passwd", "", "log.h5")), "/t"),
            group.file["/"],
        )
    )


def _virtual(group: Any, dice: random.Random) -> None:
    layout = h5py.VirtualLayout((12,), "f8")
    layout[:] = h5py.VirtualSource(
        dice.choice((".", "other.h5", "/nowhere/x.h5", "log.h5")), dice.choice(("/t", "u")), (12,)
    )
    group.create_virtual_dataset(dice.choice(NAMES), layout)


def _outside(group: Any, dice: random.Random) -> None:
    group.create_dataset(dice.choice(NAMES), (12,), "f8", external=[("/etc/passwd", 0, 96)])


_PARTS = (
    _dataset,
    _dataset,
    _dataset,
    _dataset,
    _table,
    _texts,
    _odd_kind,
    _nexus,
    _link,
    _virtual,
    _outside,
    _declared_huge,
)
