"""The search itself: structures in order, each from its coarse grid to its polished best."""

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from ...ident.fitted import Plausible
from ...ident.given import plant_sign
from ...ident.plant import Plant
from ...ident.run import FloatArray
from ..aside import HERE, Aside, Pending
from ..designed import Tried
from ..horizon import SEARCHED, first_horizon
from ..requirements import Requirement, StructureName
from ..situation import STEP, Situation
from ..values import Bench, bench_of
from .candidates import Space, can_weight
from .objective import Scores, spare_plants
from .polish import Found, check, extremes, polish
from .starts import coarse_search, pace
from .structures import Plan

Progress = Callable[[str, float], None]

PLANTS = 200
ENOUGH = 0.05  # slack at which a simpler structure is taken as it is
_BETTER = 0.03  # a richer structure must win by this when a simpler one is feasible
_FILTER = 0.15  # rad; turn of the derivative filter at the pace of the plant, at most
_LEFT_OVER = 0.02  # of the step: offset of P and PD that passes without being asked for


@dataclass(frozen=True, eq=False)
class Search:
    """What the search hands on.

    Attributes
    ----------
    found : Found
        The best of the chosen structure.
    tried : tuple of Tried
    bench : Bench
        The plants it ran on, the fitted one first.
    used : (q,) array of int
        Which plausible plants those were.
    """

    found: Found
    tried: tuple[Tried, ...]
    bench: Bench
    used: FloatArray


def with_nominal(nominal: Plant, plausible: Plausible, situation: Situation) -> Plausible:
    """The fitted plant in front; it takes the median friction and valve."""
    return plausible.led_by(nominal, situation.operating_command)


def search(
    nominal: Plant, plausible: Plausible, situation: Situation, plan: Plan, progress: Progress, aside: Aside = HERE
) -> Search:
    """Search every structure of the plan until one has slack enough; keep the best."""
    count = min(PLANTS, len(plausible.plants))
    used = np.unique(np.linspace(0, len(plausible.plants) - 1, count).astype(int))
    some = with_nominal(nominal, plausible.take(used.tolist()), situation)
    horizon = first_horizon(nominal, situation, SEARCHED)
    bench = replace(bench_of(some, situation, horizon, stand_in=True, smooth=True, grid=90), cautious=True)
    rough = _rough(some, situation, nominal)
    best: Found | None = None
    smoothest: Found | None = None
    most = -np.inf
    tried: list[Tried] = list(plan.skipped)
    order = plan.structures + plan.last
    both = _Both(order, nominal, bench, aside)
    for i, structure in enumerate(order):
        if i >= len(plan.structures) and best is not None and max(best.slack, most) >= 0.0:
            break
        progress(f"searching zeros and gain of {structure}", i / len(order))
        found = both.best(i)
        if rough is not None:
            smooth = found.slack
            held = check(rough, found.space, found.point)
            if some.valves is not None and smooth > most:
                smoothest, most = held, smooth
            if some.valves is not None and smooth >= 0.0 and held.slack < ENOUGH:
                held = max(held, best_of(structure, nominal, rough), key=lambda one: one.slack)
            found = replace(held, slack=min(smooth, held.slack))
        tried.append(tried_row(structure, found, bench))
        if best is None or found.slack > (best.slack + _BETTER if best.slack >= 0.0 else best.slack):
            best = found
        if best.slack >= ENOUGH:
            break
    both.drop()
    if best is None:
        raise AssertionError("a plan holds at least one structure")
    if best.slack < 0.0 and smoothest is not None:
        best = smoothest  # none holds: those gains are shown that would, if nothing stuck
    return Search(best, tuple(tried), bench, used)


class _Both:
    """The best of one structure after another; while one is searched here, the next may be searched aside."""

    def __init__(self, order: tuple[StructureName, ...], nominal: Plant, bench: Bench, aside: Aside) -> None:
        self._order, self._nominal, self._bench, self._aside = order, nominal, bench, aside
        self._ahead: dict[int, Pending[Found]] = {}
        self._here: dict[int, Found] = {}

    def best(self, i: int) -> Found:
        """The best of the i-th structure; they are asked for in order."""
        if i in self._ahead:
            if self._ahead[i].busy() and i + 1 < len(self._order):
                self._here[i + 1] = best_of(*self._task(i + 1))  # rather than wait
            return self._ahead[i].result()
        if i not in self._here:
            if i + 1 < len(self._order):
                self._ahead[i + 1] = self._aside.start(best_of, *self._task(i + 1))
            self._here[i] = best_of(*self._task(i))
        return self._here[i]

    def drop(self) -> None:
        """No more is asked for."""
        for pending in self._ahead.values():
            pending.drop()

    def _task(self, i: int) -> tuple[StructureName, Plant, Bench]:
        structure = self._order[i]
        return structure, self._nominal, _asking(self._bench, structure, self._nominal)


def best_of(structure: StructureName, nominal: Plant, bench: Bench) -> Found:
    """The best law of one structure on the bench."""
    sign = plant_sign(nominal)
    weighted = can_weight(structure) and bench.situation.step != 0.0 and bench.situation.asks(STEP)
    quick = _FILTER / pace(bench, extremes(bench)[:3])
    space = Space(structure, sign, bench.exact.interval, quick, weighted)
    starts, _ = coarse_search(bench, space, extremes(bench)[:3], keep=4)
    generations = 6 + 4 * space.size
    return polish(bench, space, starts, rounds=3, generations=generations, seed=20 + space.size)


def again(
    search_: Search, nominal: Plant, plausible: Plausible, situation: Situation, failing: FloatArray, seed: int
) -> tuple[Found, Bench]:
    """Polish once more from the found point on more plants, the failing ones among them, with the very law."""
    count = min(2 * PLANTS, len(plausible.plants))
    index = np.linspace(0, len(plausible.plants) - 1, count).astype(int)
    index = np.unique(np.concatenate([index, failing[:40]]))
    stricter = replace(situation.requirements, confidence=min(situation.requirements.confidence + 0.012, 1.0))
    tighter = replace(situation, requirements=stricter)
    some = with_nominal(nominal, plausible.take(index.tolist()), tighter)
    horizon = first_horizon(nominal, situation)
    exact = horizon < 2500 * situation.setting.update_interval
    bench = replace(bench_of(some, tighter, horizon, stand_in=not exact, grid=90), cautious=True)
    point = search_.found.point
    space = search_.found.space
    return polish(bench, space, point[None], rounds=2, generations=12, seed=seed, narrow=0.4), bench


def _asking(bench: Bench, structure: str, nominal: Plant) -> Bench:
    """P and PD must not leave an offset that nobody allowed."""
    situation = bench.situation
    free = situation.setting.structures is None and situation.requirements.find("steady_state_error") is None
    if structure not in ("P", "PD", "lead", "lag", "lead-lag") or not free or situation.step == 0.0:
        return bench
    hidden = Requirement("steady_state_error", _LEFT_OVER * abs(situation.step), "at_most")
    return replace(bench, situation=replace(situation, floors=(*situation.floors, hidden)))


def tried_row(structure: StructureName, found: Found, bench: Bench) -> Tried:
    """One row for the report: slack, share, and the requirement that binds."""
    share = float(found.scores.share_meeting()[0])
    return Tried(structure, found.slack, share, binding(found.scores, bench))


def item_slacks(scores: Scores, bench: Bench) -> dict[str, float]:
    """Slack of each requirement by itself at the wished share, and of the limits on every plant."""
    spare = spare_plants(scores.plant.shape[1], bench.situation.requirements.confidence)
    items = bench.situation.items
    found: dict[str, float] = {}
    for i, item in enumerate(items):
        found[item.name] = float(np.sort(scores.items[0, :, i])[spare])
    if np.isfinite(scores.limits).any():
        found["limits of the response"] = float(scores.limits[0].min())
    return found


def binding(scores: Scores, bench: Bench) -> str:
    """The name of the tightest requirement."""
    slacks = item_slacks(scores, bench)
    if scores.limits[0].min() <= -10.0:
        return "stability"
    return min(slacks, key=lambda name: slacks[name]) if slacks else "stability"


def _rough(some: Plausible, situation: Situation, nominal: Plant) -> Bench | None:
    """The plants with what sticks, where anything does; hunting can set out late, so they are watched for longer."""
    if some.valves is None and not np.any(some.stiction > 0.0):
        return None
    bench = bench_of(some, situation, first_horizon(nominal, situation), stand_in=True, grid=90)
    return replace(bench, cautious=some.valves is not None)
