"""How long a step must be watched: an optimiser exploits a horizon that is too short."""

import numpy as np

from ..ident.plant import Plant
from .situation import Situation

_SETTLINGS = 5.0  # settling times that are watched at least
SEARCHED = 2.5  # the same in the search, whose steady values are exact and whose stability is counted, not watched


def first_horizon(plant: Plant, situation: Situation, settlings: float = _SETTLINGS) -> float:
    """Horizon in s before anything is simulated: five times the slowest time asked for, or the plant's own pace."""
    setting = situation.setting
    delay = plant.dead_time + setting.computation_delay + setting.update_interval
    asked = [item.limit for item in situation.items if item.name in ("settling_time", "disturbance_recovery")]
    rises = [2.0 * item.limit for item in situation.items if item.name == "rise_time"]
    times = asked or rises or [natural_time(plant, situation)]
    return max(settlings * max(times), 12.0 * delay, 60.0 * setting.update_interval)


def natural_time(plant: Plant, situation: Situation) -> float:
    """A settling time that an unhurried loop around this plant reaches, s."""
    setting = situation.setting
    delay = plant.dead_time + setting.computation_delay + setting.update_interval
    poles = plant.poles
    moving = poles[np.abs(poles) > 0.0]
    lags = float(np.sum(1.0 / np.abs(moving)))
    return 3.0 * lags + 6.0 * delay


def watched_long_enough(horizon: float, settled: np.ndarray) -> float:
    """Horizon needed for the settling times found: five of the longest finite one, or twice as long if any is not."""
    known = settled[np.isfinite(settled)]
    wanted = _SETTLINGS * float(known.max()) if known.size else horizon
    if np.any(np.isinf(settled)):
        wanted = max(wanted, 2.0 * horizon)
    return max(wanted, horizon)
