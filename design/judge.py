"""Judge fixed gains on a set of plausible plants: the very law that is shipped, every requirement, every limit."""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from ..ident.fitted import Noise, Plausible
from ..ident.law import Law
from ..ident.run import FloatArray
from .continuous import standing_in
from .discretise import columns_of, columns_of_law
from .gains import Gains
from .horizon import first_horizon, watched_long_enough
from .requirements import ControllerSetting, Limits, Requirement, Requirements
from .situation import Situation, situation_of
from .slack import limit_slacks, meets
from .values import Bench, Values, bench_of, values_of

_MOST_SAMPLES = 50_000
_SAMPLED = 40  # plants on which the horizon is found


@dataclass(frozen=True, eq=False)
class PlantVerdicts:
    """One law on p plants.

    Attributes
    ----------
    items : tuple of Requirement
        The stated requirements, then the floors.
    stated : int
        How many of the items were stated by the person.
    stable, meets_all, limits_kept : (p,) arrays of bool
        meets_all: stable and every item together.
    values : dict of requirement name to (p,) array, base units
        inf: never.
    extremes : dict of limit name to (p,) array, absolute readings; rates as magnitudes
    clamped : (p,) array, s
    horizon : float, s
        How long each step was watched.
    """

    items: tuple[Requirement, ...]
    stated: int
    stable: NDArray[np.bool_]
    meets_all: NDArray[np.bool_]
    limits_kept: NDArray[np.bool_]
    values: dict[str, FloatArray]
    extremes: dict[str, FloatArray]
    clamped: FloatArray
    horizon: float

    @property
    def share_meeting(self) -> float:
        """Share of the plants that meet everything together."""
        return float(np.mean(self.meets_all))

    def take(self, chosen: slice) -> "PlantVerdicts":
        """The same for some of the plants."""
        return replace(
            self,
            stable=self.stable[chosen],
            meets_all=self.meets_all[chosen],
            limits_kept=self.limits_kept[chosen],
            values={name: value[chosen] for name, value in self.values.items()},
            extremes={name: value[chosen] for name, value in self.extremes.items()},
            clamped=self.clamped[chosen],
        )

    def met(self, item: Requirement) -> NDArray[np.bool_]:
        """(p,) whether this item holds by itself."""
        value = self.values.get(item.name, np.full(self.stable.size, np.nan))
        return np.asarray(self.stable & meets(item, value))


def judge_plants(
    gains: Gains,
    plausible: Plausible,
    *,
    operating_command: float,
    operating_response: float,
    noise: Noise | None,
    requirements: Requirements,
    limits: Limits,
    setting: ControllerSetting,
    law: Law | None = None,
    watched: float | None = None,
) -> PlantVerdicts:
    """Judge fixed gains on plausible plants.

    Parameters
    ----------
    law : Law, optional
        A difference equation to use as it stands; default: the one made from the gains. Its clamp is that of `limits`.
    watched : float, s, optional
        Watch each step for so long, whatever settles later; default: as long as the plants need.

    Returns
    -------
    PlantVerdicts
        (p,) arrays in the order of the plants.
    """
    situation = situation_of(
        operating_command=operating_command,
        operating_response=operating_response,
        noise=noise,
        requirements=requirements,
        limits=limits,
        setting=setting,
    )
    situation = standing_in(situation, plausible.plants[0])
    if watched is None:
        return judged_on(gains, plausible, situation, law=law)
    bench, values = _evaluated(gains, plausible, situation, watched, law)
    return _verdicts(values, situation, bench.samples * bench.running.interval)


def judged_on(
    gains: Gains, plausible: Plausible, situation: Situation, *, law: Law | None = None, horizon: float = 0.0
) -> PlantVerdicts:
    """The same for a situation already gathered; the horizon grows until five settling times fit."""
    horizon = max(horizon, first_horizon(plausible.plants[0], situation))
    if len(plausible.plants) > 3 * _SAMPLED:
        horizon = _long_enough(gains, plausible, situation, horizon, law)
    bench, values = _evaluated(gains, plausible, situation, horizon, law)
    wanted = min(watched_long_enough(horizon, values.settled), _MOST_SAMPLES * situation.setting.update_interval)
    if len(plausible.plants) <= 3 * _SAMPLED and wanted > 1.05 * horizon:
        horizon = _long_enough(gains, plausible, situation, wanted, law)
        bench, values = _evaluated(gains, plausible, situation, horizon, law)
    return _verdicts(values, situation, bench.samples * bench.running.interval)


def _long_enough(gains: Gains, plausible: Plausible, situation: Situation, horizon: float, law: Law | None) -> float:
    """The horizon that some of the plants need."""
    some = plausible.take(np.unique(np.linspace(0, len(plausible.plants) - 1, _SAMPLED).astype(int)).tolist())
    longest = _MOST_SAMPLES * situation.setting.update_interval
    for _ in range(3):
        _, values = _evaluated(gains, some, situation, horizon, law)
        wanted = min(watched_long_enough(horizon, values.settled), longest)
        if wanted <= 1.05 * horizon:
            break
        horizon = wanted
    return horizon


def _evaluated(
    gains: Gains, plausible: Plausible, situation: Situation, horizon: float, law: Law | None
) -> tuple[Bench, Values]:
    bench = bench_of(plausible, situation, horizon, most=_MOST_SAMPLES)
    which = np.arange(len(plausible.plants))
    columns = columns_of([gains]).take(np.zeros(which.size, dtype=int))
    given = None if law is None else columns_of_law(law).take(np.zeros(which.size, dtype=int))
    return bench, values_of(bench, which, columns, law=given)


def _verdicts(values: Values, situation: Situation, horizon: float) -> PlantVerdicts:
    count = values.stable.size
    rows = [meets(item, values.of.get(item.name, np.full(count, np.nan))) for item in situation.items]
    together = np.all(rows, axis=0) if rows else np.ones(count, dtype=bool)
    kept = [slack >= 0.0 for slack in limit_slacks(values, situation).values()]
    inside = np.all(kept, axis=0) if kept else values.stable
    return PlantVerdicts(
        situation.items,
        len(situation.requirements.items),
        values.stable,
        np.asarray(values.stable & together),
        np.asarray(values.stable & inside),
        values.of,
        values.extremes,
        values.clamped,
        horizon,
    )
