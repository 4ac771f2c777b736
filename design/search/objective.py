"""The one number that the search raises: smallest normalised slack over the plants that must meet everything."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ...ident.run import FloatArray
from ..discretise import GainColumns
from ..requirements import RequirementName
from ..sampled.bank import IndexArray
from ..situation import Situation
from ..slack import limit_slacks, requirement_slacks
from ..values import Bench, values_of

SPEED: tuple[RequirementName, ...] = (
    "settling_time",
    "rise_time",
    "disturbance_peak",
    "disturbance_recovery",
    "ramp_error",
)
_ENOUGH = 0.35  # slack beyond which more of it is not worth a slower loop
_ENOUGH_UNASKED = 0.1  # the same when no speed is asked for


@dataclass(frozen=True, eq=False)
class Scores:
    """What g laws reach on q plants.

    Attributes
    ----------
    plant : (g, q) array
        Smallest requirement slack of each plant.
    limits : (g, q) array
        Smallest limit slack; -10 where unstable; inf without limits.
    items : (g, q, items) array
        Slack of each requirement.
    """

    plant: FloatArray
    limits: FloatArray
    items: FloatArray

    def smallest(self, counts: NDArray[np.bool_]) -> FloatArray:
        """(g,) smallest slack: limits over all plants, requirements over those that count."""
        return np.asarray(np.minimum(self.plant[:, counts].min(axis=1), self.limits.min(axis=1)))

    def at_share(self, confidence: float) -> FloatArray:
        """(g,) slack that the share `confidence` of the plants reaches, and the limits of every plant."""
        spare = spare_plants(self.plant.shape[1], confidence)
        return np.asarray(np.minimum(np.sort(self.plant, axis=1)[:, spare], self.limits.min(axis=1)))

    def share_meeting(self) -> FloatArray:
        """(g,) share of the plants whose slack is not negative."""
        return np.asarray(np.mean((self.plant >= 0.0) & (self.limits >= 0.0), axis=1))


def spare_plants(count: int, confidence: float) -> int:
    """How many of `count` plants may fail."""
    return min(int(np.floor(count * (1.0 - confidence) + 1e-9)), count - 1)


def scores_of(bench: Bench, plants: IndexArray, gains: GainColumns, *, refine: bool = False) -> Scores:
    """Every law of `gains` on every plant of `plants`."""
    laws, count = gains.count, plants.size
    which = np.tile(plants, laws)
    values = values_of(bench, which, gains.take(np.repeat(np.arange(laws), count)), refine=refine)
    slacks = requirement_slacks(values, bench.situation)
    bounds = list(limit_slacks(values, bench.situation).values())
    stability = np.where(values.stable, np.inf, -10.0)
    limit = np.min([stability, *bounds], axis=0)
    plant = slacks.min(axis=0) if slacks.shape[0] else np.where(values.stable, 1.0, -10.0)
    shape = (laws, count)
    items = slacks.T.reshape(laws, count, slacks.shape[0])
    return Scores(plant.reshape(shape), limit.reshape(shape), items)


def wish(slack: FloatArray, gains: GainColumns, situation: Situation) -> FloatArray:
    """(g,) what is raised: the slack, and once there is enough of it a calm command.

    Where no speed is asked for, a calm command would be one that does nothing: there the loop is made fast instead.
    """
    if situation.asks(SPEED):
        lag = np.where(gains.filter_time > 0.0, gains.filter_time, 1.0)
        lively = np.abs(gains.proportional) + np.abs(gains.derivative) / lag + 1e-3 * np.abs(gains.integral)
        return np.minimum(slack, _ENOUGH) - np.where(slack >= _ENOUGH, 1e-3 * np.log(lively + 1e-300) - 0.1, 0.0)
    strength = np.abs(np.where(gains.integral != 0.0, gains.integral, gains.proportional))
    bonus = 0.1 + 1e-3 * np.log(strength + 1e-300)
    return np.minimum(slack, _ENOUGH_UNASKED) + np.where(slack >= _ENOUGH_UNASKED, bonus, 0.0)
