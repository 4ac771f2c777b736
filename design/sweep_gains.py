"""Run the fitted plant and the plausible ones over many loop gains, zeros fixed."""

from collections.abc import Iterable, Iterator
from dataclasses import replace

import numpy as np

from ..ident.fitted import Plausible
from ..ident.plant import ComplexArray, Plant
from ..ident.run import FloatArray
from .compensator import loop_gain, open_loop
from .continuous import standing_in
from .designed import GainInterval, Selection
from .discretise import GainColumns, columns_of
from .gain_sets import believed_up_to
from .gains import Gains
from .horizon import SEARCHED, first_horizon
from .locus.branches import locus_branches
from .locus.condition import LocusError
from .sampled.bank import IndexArray
from .sampled.loop import History
from .search.drive import with_nominal
from .situation import Situation
from .slack import meets
from .steady import Rest
from .sweep import Band, GainSweep
from .values import Bench, Values, bench_of, values_of

_GAINS = 161
_FEWEST, _MOST = 30, 100  # plausible plants
_WORK, _ROUGH_WORK = 7.5e6, 2.4e6  # steps of single plants in all; friction is run in closed form, which costs more
_STAND_IN = 360  # samples from which on a longer update interval may stand in
_FEW = 100  # samples; where there are more, nothing is looked at between them
_COARSER = (1000, 2000)  # samples of a coarser stand-in of a continuous controller for many plants
_LEAST_REACH = 1.05
_FINE = 12_000  # samples up to which the fitted plant is run with the very law
_SHOWN = 72  # times of a band
_AT_ONCE, _ROUGH_AT_ONCE = 800, 4000  # columns: few enough for the processor's cache, and many for long formulas
_LOWEST = frozenset({"command lowest", "response lowest"})


def gain_grid(selection: Selection, span: tuple[float, float], count: int = _GAINS) -> FloatArray:
    """Rising gains, even in the logarithm, with the chosen one and every end of an interval in the span.

    Examples
    --------
    >>> one = Selection(2.0, "", -1 + 0j, 0.0, -1 + 0j, ((1.5, None),), (), ())
    >>> [float(k) for k in gain_grid(one, (1.0, 4.0), 5)]
    [1.0, 1.5, 2.0, 4.0]
    """
    low, high = span
    every = [*selection.intervals, *selection.intervals_plausible]
    every += [interval for _, intervals in selection.rows for interval in intervals]
    own = np.unique([selection.loop_gain, *(edge for edge in _ends(every) if low < edge < high)])
    even = np.geomspace(low, high, max(count - own.size, 2))
    even[[0, -1]] = low, high
    return np.unique(np.concatenate([even, own]))


def _ends(intervals: Iterable[GainInterval]) -> Iterator[float]:
    return (edge for interval in intervals for edge in interval if edge is not None)


def sweep_gains(
    gains: Gains,
    selection: Selection,
    nominal: Plant,
    plausible: Plausible,
    situation: Situation,
    *,
    span: tuple[float, float],
    shown: float,
) -> GainSweep:
    """Poles, requirements, limits and the test step over loop gains.

    Parameters
    ----------
    gains : Gains
        Their zeros stay.
    span : (low, high)
        Ends of the gains; of a continuous controller none above which its stand-in is not believed.
    shown : float, s
        How much of the test step is kept.
    """
    asked = standing_in(situation, nominal).without_floors()
    fitted = _fitted_bench(nominal, plausible, asked)
    low, high = span
    if asked.setting.continuous:
        loop = open_loop(gains, nominal, asked.setting)
        reach = believed_up_to(fitted, columns_of([gains]), selection.loop_gain, loop)
        high = min(high, max(reach, _LEAST_REACH) * selection.loop_gain)
    grid = gain_grid(selection, (low, high))
    factors = grid / selection.loop_gain
    zero = np.zeros(grid.size, dtype=int)
    found = values_of(fitted, zero, columns_of([gains]).take(zero).times(factors))
    many = _Many(gains, nominal, plausible, asked, shown, float(factors[-1]))
    many.run(factors)
    return GainSweep(
        gains=grid,
        chosen=int(np.argmin(np.abs(grid - selection.loop_gain))),
        poles=_poles(gains, nominal, situation, grid),
        fitted=fitted,
        values=found.of,
        stable=found.stable,
        bands=many.bands,
        worst=many.worst,
        share_stable=many.share_stable,
        share_meeting=many.share_meeting,
        plants=many.count,
        band_interval=many.bench.running.interval,
        capped=high < span[1],
        time=many.time,
        response=many.response,
        command=many.command,
    )


def _fitted_bench(nominal: Plant, plausible: Plausible, situation: Situation) -> Bench:
    horizon = first_horizon(nominal, situation)
    fine = horizon <= _FINE * situation.setting.update_interval
    alone = _straight(with_nominal(nominal, plausible, situation).take([0]))
    return bench_of(alone, situation, horizon, stand_in=not fine)


def _straight(alone: Plausible) -> Plausible:
    """The page runs the fitted plant as it is about its operating command."""
    return replace(alone, curves=None)


def _poles(gains: Gains, plant: Plant, situation: Situation, grid: FloatArray) -> tuple[ComplexArray, ...]:
    try:
        return locus_branches(open_loop(gains, plant, situation.setting), grid)
    except LocusError:  # infinitely many poles right of any edge: none is told apart
        return ()


class _Many:
    """The plausible plants over all gains, a few gains at a time."""

    def __init__(
        self, gains: Gains, nominal: Plant, plausible: Plausible, situation: Situation, shown: float, most: float
    ) -> None:
        total = len(plausible.plants)
        horizon = max(first_horizon(nominal, situation, SEARCHED), shown)
        continuous = situation.setting.continuous
        situation = _coarser(gains, nominal, plausible, situation, horizon, most) if continuous else situation
        self.columns, self.situation = columns_of([gains]), situation
        samples = horizon / situation.setting.update_interval
        samples = samples if continuous else min(samples, _STAND_IN)
        points = 1 if samples > _FEW else 2
        rough = bool(np.any(plausible.stiction > 0.0))
        work, self.at_once = (_ROUGH_WORK, _ROUGH_AT_ONCE) if rough else (_WORK, _AT_ONCE)
        self.count = min(total, int(np.clip(work / (_GAINS * samples * points), _FEWEST, _MOST)))
        index = np.linspace(0, total - 1, self.count).astype(int)
        some = plausible.take(index.tolist())
        self.bench = bench_of(some, situation, horizon, stand_in=not continuous, grid=60, points=points)
        running = self.bench.running
        last = max(int(min(shown / running.interval, self.bench.samples - 1)), 1)
        places = np.linspace(0.0, 1.0, _SHOWN) ** 1.5 * last
        self.rows = np.unique(places.round().astype(int)) if situation.step else np.zeros(0, dtype=int)
        self.time = self.rows * running.interval

    def run(self, factors: FloatArray) -> None:
        """Fill the results for all factors on the chosen gain."""
        size = factors.size
        self._low = np.full((2, self.rows.size, size), np.nan)
        self._high = np.full_like(self._low, np.nan)
        each = max(1, self.at_once // self.count)
        parts = [self._some(factors, range(i, min(i + each, size))) for i in range(0, size, each)]
        self._gather(parts, size)

    def _some(self, factors: FloatArray, places: range) -> Values:
        which = np.tile(np.arange(self.count), len(places))
        some: GainColumns = self.columns.take(np.zeros(which.size, dtype=int))
        laws = some.times(np.repeat(factors[list(places)], self.count))

        def watch(chosen: IndexArray, before: Rest, history: History) -> None:
            self._keep_bands(places, chosen, before, history)

        return values_of(self.bench, which, laws, refine=False, watch=watch)

    def _keep_bands(self, places: range, chosen: IndexArray, before: Rest, history: History) -> None:
        """The band at each gain at which every plant is stable."""
        points, situation = self.bench.running.points, self.situation
        response = history.response[np.maximum(self.rows * points - 1, 0)]
        response[self.rows == 0] = 0.0
        response += before.response + situation.operating_response
        command = history.command[self.rows] + before.command + situation.operating_command
        owner = chosen // self.count
        for i, place in enumerate(places):
            own = owner == i
            if int(own.sum()) == self.count:
                for quantity, values in enumerate((response, command)):
                    self._low[quantity, :, place], self._high[quantity, :, place] = inner(values[:, own])

    def _gather(self, parts: list[Values], size: int) -> None:
        def table(name: str, key: str) -> FloatArray:
            return np.concatenate([getattr(part, name)[key] for part in parts]).reshape(size, self.count)

        stable = np.concatenate([part.stable for part in parts]).reshape(size, self.count)
        values = {name: table("of", name) for name in parts[0].of}
        self.bands = {}
        for name, value in values.items():
            low, high = inner(np.where(np.isnan(value), np.inf, value))
            gone = ~stable.all(axis=1)
            self.bands[name] = Band(np.where(gone, np.nan, low), np.where(gone, np.nan, high))
        self.worst = {name: _furthest(name, table("extremes", name)) for name in _common(parts)}
        self.share_stable = stable.mean(axis=1)
        rows = [meets(item, values[item.name]) for item in self.situation.items if item.name in values]
        self.share_meeting = np.all([stable, *rows], axis=0).mean(axis=1)
        self.response = Band(self._low[0], self._high[0])
        self.command = Band(self._low[1], self._high[1])


def _coarser(
    gains: Gains, nominal: Plant, plausible: Plausible, situation: Situation, horizon: float, most: float
) -> Situation:
    """A longer interval of the stand-in, where that is believed up to `most` times the gain too."""
    loop = open_loop(gains, nominal, situation.setting)
    for samples in _COARSER:
        interval = max(horizon / samples, situation.setting.update_interval)
        longer = replace(situation, setting=replace(situation.setting, update_interval=interval))
        alone = bench_of(_straight(with_nominal(nominal, plausible, longer).take([0])), longer, horizon, points=1)
        if believed_up_to(alone, columns_of([gains]), abs(loop_gain(gains)), loop) >= most:
            return longer
    return situation


def _common(parts: list[Values]) -> list[str]:
    return [name for name in parts[0].extremes if all(name in part.extremes for part in parts)]


def _furthest(name: str, value: FloatArray) -> FloatArray:
    """(g,) worst over the plants; NaN where one was not run."""
    worst = value.min(axis=1) if name in _LOWEST else value.max(axis=1)
    return np.asarray(worst)


def inner(values: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Ends of the inner 95 % along the last axis, as order statistics: inf stays inf.

    Examples
    --------
    >>> low, high = inner(np.arange(41.0)[None])
    >>> float(low[0]), float(high[0])
    (1.0, 39.0)
    """
    order = np.sort(values, axis=-1)
    last = values.shape[-1] - 1
    return order[..., int(0.025 * last)], order[..., int(np.ceil(0.975 * last))]
