"""What a look at a record's arrays gives: one thing seen."""

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

BoolArray = NDArray[np.bool_]
Refuses = Literal["no", "holds", "stops"]


@dataclass(frozen=True)
class Seen:
    """Something seen in a record.

    Attributes
    ----------
    kind : str
        "clipping", "gap", "dead response", "idle command" ...
    where, size, action : str
        Place and size with units; what was done, or what must be done.
    refuses : {"no", "holds", "stops"}
        "no": mended or harmless. "holds": nothing may be released on it. "stops": the record can't be used.
    """

    kind: str
    where: str
    size: str
    action: str
    refuses: Refuses = "no"


def stretches(mask: BoolArray) -> list[tuple[int, int]]:
    """Runs of True in a mask, as half-open pairs of indices.

    Examples
    --------
    >>> stretches(np.array([True, True, False, True]))
    [(0, 2), (3, 4)]
    """
    edges = np.flatnonzero(np.diff(np.concatenate([[False], mask, [False]]).astype(np.int8)))
    return [(int(start), int(end)) for start, end in edges.reshape(-1, 2)]
