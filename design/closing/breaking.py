"""How much each parameter of the plant may change before the chosen gains break a requirement or a limit."""

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from ...ident.catalogue import CATALOGUE, Structure
from ...ident.fitted import Fit, Plausible
from ...ident.plant import Plant
from ...ident.run import FloatArray

# Sizes that are tried, as shares of the largest: a factor of two either way; of the dead time, the loop's own pace.
_SIZES = np.geomspace(0.02, 1.0, 8)
_FACTOR = float(np.log(2.0))
_BETWEEN = np.array([0.25, 0.5, 0.75])  # tried between the last size that holds and the first that breaks

Judge = Callable[[Plausible], NDArray[np.bool_]]


@dataclass(frozen=True, eq=False)
class Breaking:
    """The smallest change of one parameter, one way, that breaks something on the fitted plant.

    Attributes
    ----------
    name : str
        "gain", "dead time", or a shape of the structure.
    size : float
        Of the dead time in s, else of the logarithm. Signed. The gains hold on everything tried that is smaller.
    before, after : (s + 2,) or (s + 3,) arrays
        The internal parameters (see `Fit.draws`) without and with it.
    """

    name: str
    size: float
    before: FloatArray
    after: FloatArray


def breaking_changes(fit: Fit, meets: Judge, pace: float) -> tuple[Breaking, ...]:
    """One for each parameter and way in which there is one; empty where the gains fail on the fitted plant already.

    Parameters
    ----------
    fit : Fit
        With draws.
    meets : callable
        Plants -> (p,) bool: whether the gains meet everything on each.
    pace : float, s
        Of the loop: a dead time is changed by up to so much.
    """
    structure = next((s for s in CATALOGUE if s.name == fit.structure), None)
    if structure is None or not fit.draws.size:
        return ()
    centre = np.median(fit.draws, axis=0)
    ways = _ways(structure, centre, pace)
    rows = [_changed(structure, centre, way, share) for way in ways for share in _SIZES]
    first = meets(_plants(fit, structure, [centre, *rows]))
    if not first[0]:
        return ()
    broken = [(way, held) for way, held in zip(ways, first[1:].reshape(len(ways), -1), strict=True) if not held.all()]
    tried = [_between(held) for _, held in broken]
    finer = [
        _changed(structure, centre, way, s) for (way, _), shares in zip(broken, tried, strict=True) for s in shares
    ]
    if not finer:
        return ()
    again = meets(_plants(fit, structure, finer)).reshape(len(broken), -1)
    found = []
    for (way, held), shares, row in zip(broken, tried, again, strict=True):
        share = _SIZES[int(np.argmin(held))] if row.all() else shares[int(np.argmin(row))]
        after = _changed(structure, centre, way, share)
        found.append(Breaking(_name(structure, way.place), float(way.largest * share), centre, after))
    return tuple(found)


@dataclass(frozen=True)
class _Way:
    """Which internal parameter is changed, and the largest change that is tried, signed."""

    place: int
    largest: float


def _ways(structure: Structure, centre: FloatArray, pace: float) -> list[_Way]:
    """Every parameter up and down: a factor of two; the dead time by the loop's pace, and down to nothing."""
    late = len(structure.shapes)
    dead_time = max(float(centre[late]), 0.0)
    ways = [_Way(i, way) for i in range(late + 2) if i != late for way in (_FACTOR, -_FACTOR)]
    ways.append(_Way(late, dead_time + pace))
    return [*ways, _Way(late, -dead_time)] if dead_time > 0.0 else ways


def _between(held: NDArray[np.bool_]) -> FloatArray:
    """Shares of the largest change between the last that holds and the first that breaks."""
    first = int(np.argmin(held))
    low, high = (0.0 if first == 0 else _SIZES[first - 1]), _SIZES[first]
    return np.asarray(low + (high - low) * _BETWEEN)


def _name(structure: Structure, i: int) -> str:
    count = len(structure.shapes)
    return structure.shapes[i].name if i < count else "dead time" if i == count else "gain"


def _changed(structure: Structure, centre: FloatArray, way: _Way, share: float) -> FloatArray:
    """Internal parameters with one of them changed; a zero stays where it is when the gain changes."""
    out, size = centre.copy(), way.largest * share
    if way.place <= len(structure.shapes):
        out[way.place] += size
    else:
        out[way.place :] *= np.exp(size)
    return out


def _plants(fit: Fit, structure: Structure, rows: list[FloatArray]) -> Plausible:
    """Of internal parameters, about the fitted operating command, the fitted valve before each."""
    at = len(structure.shapes)
    plants, friction = [], []
    for row in rows:
        numerator, denominator = structure.polynomials(tuple(float(v) for v in np.exp(row[:at])))
        top = tuple(float(row[at + 1]) * c for c in numerator)
        top = (float(row[at + 2]), *top) if structure.zero and len(row) > at + 2 else top
        plants.append(Plant(top, denominator, float(max(row[at], 0.0))))
        friction.append(float(np.exp(max(row[at - 2 : at]))) if structure.friction else 0.0)
    valves = fit.plausible.valves
    made = Plausible(tuple(plants), np.full(len(rows), fit.operating_command), np.array(friction))
    return made if valves is None else replace(made, valves=np.tile(np.median(valves, axis=0), (len(rows), 1)))
