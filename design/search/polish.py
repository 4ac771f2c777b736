"""From starts to one law: polish on an active set of plants, check on all, take in the plants that decide."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ...ident.run import FloatArray
from ..sampled.bank import IndexArray
from ..values import Bench
from .candidates import Space
from .evolve import evolve
from .objective import Scores, scores_of, spare_plants, wish

_SHORT = 0.05  # slack below which the other starts are tried, too
_TAKEN_IN = 4  # plants added to the active set after each check


@dataclass(frozen=True, eq=False)
class Found:
    """The best point of one structure on the whole bench.

    Attributes
    ----------
    space : Space
    point : (k,) array
    slack : float
        At the share `confidence`, limits and stability on every plant.
    worth : float
    scores : Scores
        One law on all plants of the bench.
    """

    space: Space
    point: FloatArray
    slack: float
    worth: float
    scores: Scores


@dataclass(frozen=True, eq=False)
class Active:
    """Plants that the polish runs on; those that needn't meet the requirements count for limits and stability only."""

    plants: IndexArray
    counts: NDArray[np.bool_]


def extremes(bench: Bench) -> IndexArray:
    """The first plant and those that lie farthest along the principal directions of what is plausible."""
    bank = bench.exact
    middle = bench.spectra.plant[7 + bench.spectra.frequency.shape[0] // 3]
    features = [np.log(np.abs(bank.static_gain)), bank.delay, np.log(np.abs(middle)), np.angle(middle)]
    if bank.valves is not None:
        features.append(bank.valves[0])
    table = np.array([_standardised(f) for f in features + _pole_features(bench)]).T
    _, _, directions = np.linalg.svd(table, full_matrices=False)
    along = table @ directions[:3].T
    far = np.concatenate([along.argmin(axis=0), along.argmax(axis=0)])
    return np.unique(np.concatenate([[0], far]))


def _pole_features(bench: Bench) -> list[FloatArray]:
    sizes = np.abs(bench.exact.poles)
    moving = sizes > 0.0
    slow = np.where(moving, sizes, np.inf).min(axis=1, initial=np.inf)
    fast = np.where(moving, sizes, 0.0).max(axis=1, initial=0.0)
    known = moving.any(axis=1)
    return [np.log(np.where(known, slow, 1.0)), np.log(np.where(known, fast, 1.0))]


def _standardised(feature: FloatArray) -> FloatArray:
    width = float(feature.std())
    return (feature - feature.mean()) / width if width > 0.0 else np.zeros_like(feature)


def check(bench: Bench, space: Space, point: FloatArray) -> Found:
    """One point on every plant of the bench."""
    gains = space.gains(point[None])
    scores = scores_of(bench, np.arange(len(bench.plausible.plants)), gains)
    slack = float(scores.at_share(bench.situation.requirements.confidence)[0])
    return Found(space, point, slack, float(wish(np.array([slack]), gains, bench.situation)[0]), scores)


def polish(
    bench: Bench, space: Space, starts: FloatArray, *, rounds: int, generations: int, seed: int, narrow: float = 1.0
) -> Found:
    """Rounds of polishing on the active set and checking on the whole bench.

    They begin from the best start. Where that leads to no room to spare and there are zeros enough for several tops,
    the others are raised, too: the best start often lies below a lower top.
    """
    checked = sorted((check(bench, space, start) for start in starts), key=lambda f: -f.worth)
    found = _rounds(bench, space, checked[0], rounds, generations, seed, narrow)
    if found.slack >= _SHORT or space.zeros < 2:
        return found
    others = [_rounds(bench, space, start, 1, generations, seed, narrow) for start in checked[1:]]
    best = max(others, key=lambda f: f.worth, default=found)
    if best.worth <= found.worth:
        return found
    return max(found, _rounds(bench, space, best, rounds - 1, generations, seed, 0.5 * narrow), key=lambda f: f.worth)


def _rounds(bench: Bench, space: Space, found: Found, rounds: int, generations: int, seed: int, narrow: float) -> Found:
    """From one point on, until a round brings little."""
    active = renewed(Active(extremes(bench), np.ones(extremes(bench).size, dtype=bool)), found, bench)
    for i in range(rounds):
        point = _raised(bench, space, found.point, active, generations, seed + i, narrow / (1.0 + i))
        fresh = check(bench, space, point)
        active = renewed(active, fresh, bench)
        if fresh.worth > found.worth:
            gain, found = fresh.worth - found.worth, fresh
            if gain < 0.004 and i:
                break
        elif i:
            break
    return found


def _raised(
    bench: Bench, space: Space, start: FloatArray, active: Active, generations: int, seed: int, width: float
) -> FloatArray:
    spread = np.full(space.size, 0.3 * width)
    if space.weighted:
        spread[-1] = 0.2 * width

    def worth(points: FloatArray) -> FloatArray:
        gains = space.gains(points)
        scores = scores_of(bench, active.plants, gains)
        smallest = wish(scores.smallest(active.counts), gains, bench.situation)
        deep = np.clip(scores.plant[:, active.counts], -10.0, 0.0).mean(axis=1)
        outside = np.maximum(0.0, np.abs(points[:, -1] - 0.5) - 0.5) if space.weighted else 0.0
        return np.asarray(smallest + 0.05 * deep - 0.1 * outside)

    population = 8 if space.size <= 2 else 12
    point, _ = evolve(worth, start, spread, generations=generations, population=population, seed=seed)
    return point


def renewed(active: Active, found: Found, bench: Bench) -> Active:
    """Take in the plants at the share that must hold, and those nearest a limit; release the spare ones."""
    plant, limits = found.scores.plant[0], found.scores.limits[0]
    order = np.argsort(plant, kind="stable")
    spare = spare_plants(plant.size, min(bench.situation.requirements.confidence + 0.01, 1.0))
    deciding = order[spare : spare + _TAKEN_IN]
    tight = np.argsort(limits, kind="stable")[:2]
    plants = np.unique(np.concatenate([active.plants, deciding, tight]))
    excused = order[:spare]
    return Active(plants, ~np.isin(plants, excused))
