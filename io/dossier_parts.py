"""How one array stands in the dossier."""

from collections.abc import Iterable

import h5py
import numpy as np

from ..ident.run import FloatArray


def numbers(
    group: h5py.Group, name: str, values: Iterable[float | None] | FloatArray, units: str, description: str
) -> None:
    """One array with its unit and what it is; None becomes NaN."""
    plain = values if isinstance(values, np.ndarray) else [np.nan if each is None else each for each in values]
    array = np.asarray(plain, dtype=float)
    packing = {"compression": "gzip", "shuffle": True} if array.size > 1000 else {}
    dataset = group.create_dataset(name, data=array, **packing)
    dataset.attrs["units"] = units
    dataset.attrs["description"] = description


def texts(group: h5py.Group, name: str, values: Iterable[str], description: str) -> None:
    """Some texts, in order."""
    words = list(values)
    dataset = group.create_dataset(name, shape=(len(words),), dtype=h5py.string_dtype())
    if words:
        dataset[...] = np.array(words, dtype=object)
    dataset.attrs["units"] = ""
    dataset.attrs["description"] = description
