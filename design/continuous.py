"""A controller that isn't sampled: the fine law that stands in for it in time.

The locus, the gain and its stable intervals are those of the continuous loop itself. In time a law of short interval
runs instead, on a plant whose dead time is half an interval shorter, or whose response is seen half an interval ahead
where the dead time is shorter than that: the error is of second order in the interval.
"""

from dataclasses import replace

from ..ident.law import Law
from ..ident.plant import Plant
from .discretise import law_from_gains
from .gains import Gains
from .horizon import first_horizon
from .requirements import ControllerSetting
from .situation import Situation

_SAMPLES = 4000  # of the stand-in, over the first horizon
_SCALE = 1.0  # s; horizon where neither plant nor requirements have a time of their own


def standing_in(situation: Situation, plant: Plant) -> Situation:
    """The situation with an interval for the stand-in; a sampled controller, or one that has it, stays as it is."""
    setting = situation.setting
    if not setting.continuous or setting.update_interval > 0.0:
        return situation
    horizon = first_horizon(plant, situation) or _SCALE
    return replace(situation, setting=replace(setting, update_interval=horizon / _SAMPLES))


def stand_in_law(gains: Gains, situation: Situation, plant: Plant) -> Law:
    """The fine law that stands in for gains of a continuous controller around this plant."""
    interval = standing_in(situation, plant).setting.update_interval
    return law_from_gains(gains, interval, situation.clamp)


def half_held(setting: ControllerSetting, interval: float) -> float:
    """What is added to the dead time of a bank of this interval, s: computation, less what its hold is too long."""
    own = 0.0 if setting.continuous else setting.update_interval
    return setting.computation_delay + 0.5 * (own - interval)
