"""Whether a fresh record could have shown the smallest changes of the plant that break something."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from ...ident.confront import Confronted
from .breaking import Breaking
from .words import Units, with_unit


@dataclass(frozen=True)
class Smallest:
    """The smallest change of one parameter, one way, that breaks something, beside what the record shows.

    Attributes
    ----------
    name : str
    size : float
        Of the dead time in s, else relative. Signed.
    visible : float
        Over the smallest change that the record shows (95 %): above one it would have been seen.
    """

    name: str
    size: float
    visible: float


def smallest_changes(breaking: Sequence[Breaking], alone: Confronted) -> tuple[Smallest, ...]:
    """One for each breaking change, the worst seen first."""
    found = [
        Smallest(
            each.name,
            each.size if each.name == "dead time" else float(np.expm1(each.size)),
            alone.visible(each.before, each.after),
        )
        for each in breaking
    ]
    return tuple(sorted(found, key=lambda each: each.visible))


def unseen(changes: Sequence[Smallest]) -> tuple[Smallest, ...]:
    """Those that the record could not have shown."""
    return tuple(each for each in changes if not each.visible >= 1.0)


def deciding(changes: Sequence[Smallest]) -> tuple[Smallest, ...]:
    """Of the hidden ones those that a verdict rests on.

    All but friction, which differs from day to day and which few runs pin down: it is told only.
    """
    return tuple(each for each in unseen(changes) if not each.name.startswith("friction"))


def smallest_text(changes: Sequence[Smallest], units: Units) -> str:
    """All of them by name, and whether they would have been seen; empty where there is none."""
    if not changes:
        return ""
    hidden = unseen(changes)
    seen = [each for each in changes if each not in hidden]
    parts = []
    if seen:
        which = "the smallest changes" if not hidden else "these smallest changes"
        parts.append(f"the run would have shown (95 %) {which} that break something: {_listed(seen, units)}")
    if hidden:
        parts.append(f"it could not have shown (95 %) {_listed(hidden, units)}, which {_breaks(hidden)} something too")
    return "; ".join(parts)


def hidden_text(hidden: Sequence[Smallest], units: Units) -> str:
    """The hidden ones by name."""
    return f"{_listed(hidden, units)}, which would break something"


def _breaks(changes: Sequence[Smallest]) -> str:
    return "breaks" if len(changes) == 1 else "break"


def _listed(changes: Sequence[Smallest], units: Units) -> str:
    names = dict.fromkeys(each.name for each in changes)
    return ", ".join(f"{name} {' or '.join(_size(e) for e in _by_size(changes, name))}" for name in names)


def _by_size(changes: Sequence[Smallest], name: str) -> list[Smallest]:
    return sorted((each for each in changes if each.name == name), key=lambda each: each.size)


def _size(change: Smallest) -> str:
    if change.name == "dead time":
        return with_unit(change.size, "s", "+.2g")
    return f"{100 * change.size:+.2g} %"
