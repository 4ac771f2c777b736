"""Mechanical changes of a true rig, drawn at random: what may have happened between the fit runs and the held-out one.

Each gives the changed rig and its size in words. Sizes reach from what no gain notices to what breaks the loop; whether
a change does harm is decided by running the law on the changed rig, never here.
"""

from collections.abc import Callable
from dataclasses import replace

import numpy as np
from true_rig import TrueRig
from true_rig.linear_stages import Gain, Lag, Pair, Resonance, SlowShare, Stage
from true_rig.rough_stages import Actuator, FrictionDrive

from .families import Drawn, log_uniform

Changed = tuple[TrueRig, str] | None  # None: this rig has nothing that could change so


def _stages(rig: TrueRig, change: Callable[[Stage], Stage]) -> TrueRig:
    return replace(rig, stages=tuple(change(stage) for stage in rig.stages))


def gain(drawn: Drawn, interval: float, generator: np.random.Generator) -> Changed:
    """By a factor of 1/1.8 to 1.8."""
    factor = log_uniform(generator, 1.0 / 1.8, 1.8)

    def scaled(stage: Stage) -> Stage:
        return Gain(stage.gain * factor, stage.balance, stage.bend) if isinstance(stage, Gain) else stage

    return _stages(drawn.rig, scaled), f"gain {100 * (factor - 1):+.1f} %"


def frequency(drawn: Drawn, interval: float, generator: np.random.Generator) -> Changed:
    """Of the (first) mode, by up to a quarter either way."""
    factor = log_uniform(generator, 0.8, 1.25)

    def moved(stage: Stage) -> Stage:
        if isinstance(stage, Pair) and isinstance(stage.first, Resonance):
            return Pair(moved(stage.first), stage.second, stage.weight)
        return Resonance(factor * stage.frequency, stage.damping) if isinstance(stage, Resonance) else stage

    if not any(isinstance(stage, Resonance | Pair) for stage in drawn.rig.stages):
        return None
    return _stages(drawn.rig, moved), f"frequency {100 * (factor - 1):+.1f} %"


def damping(drawn: Drawn, interval: float, generator: np.random.Generator) -> Changed:
    """Of the mode, by a factor of a third to three, still swinging."""
    factor = log_uniform(generator, 1.0 / 3.0, 3.0)
    modes = [stage for stage in drawn.rig.stages if isinstance(stage, Resonance)]
    if not modes or factor * modes[0].damping > 0.7:
        return None

    def moved(stage: Stage) -> Stage:
        return Resonance(stage.frequency, factor * stage.damping) if isinstance(stage, Resonance) else stage

    return _stages(drawn.rig, moved), f"damping {100 * (factor - 1):+.1f} %"


def lag(drawn: Drawn, interval: float, generator: np.random.Generator) -> Changed:
    """Of the slowest lag, by a factor of a half to two: another mass, another volume."""
    factor = log_uniform(generator, 0.5, 2.0)
    lags = [stage.time for stage in drawn.rig.stages if isinstance(stage, Lag | FrictionDrive)]
    if not lags:
        return None
    slowest = max(lags)

    def moved(stage: Stage) -> Stage:
        if isinstance(stage, Lag) and stage.time == slowest:
            return Lag(factor * slowest)
        if isinstance(stage, FrictionDrive):
            return FrictionDrive(factor * stage.time, stage.coulomb, stage.breakaway)
        return stage

    return _stages(drawn.rig, moved), f"lag {100 * (factor - 1):+.1f} %"


def dead_time(drawn: Drawn, interval: float, generator: np.random.Generator) -> Changed:
    """By a factor of a half to two and a half."""
    factor = log_uniform(generator, 0.5, 2.5)
    return replace(drawn.rig, dead_time=factor * drawn.rig.dead_time), f"dead time {100 * (factor - 1):+.1f} %"


def one_sample(drawn: Drawn, interval: float, generator: np.random.Generator) -> Changed:
    """One to three samples of the logger more dead time, as a new bus or another task order adds."""
    more = int(generator.integers(1, 4))
    return replace(drawn.rig, dead_time=drawn.rig.dead_time + more * interval), f"dead time +{more} samples"


def friction(drawn: Drawn, interval: float, generator: np.random.Generator) -> Changed:
    """Dry friction of a drive, from half to three times as it was."""
    factor = log_uniform(generator, 0.5, 3.0)

    def moved(stage: Stage) -> Stage:
        if isinstance(stage, FrictionDrive):
            return FrictionDrive(stage.time, factor * stage.coulomb, factor * stage.breakaway)
        return stage

    if not any(isinstance(stage, FrictionDrive) for stage in drawn.rig.stages):
        return None
    return _stages(drawn.rig, moved), f"friction {100 * (factor - 1):+.1f} %"


def actuator(drawn: Drawn, interval: float, generator: np.random.Generator) -> Changed:
    """A slower actuator: a lag of 2 to 30 % of the rig's base time more."""
    more = drawn.base * log_uniform(generator, 0.02, 0.3)

    def slower(stage: Stage) -> Stage:
        if isinstance(stage, Actuator):
            return Actuator(stage.lowest, stage.highest, stage.lag + more, stage.rate)
        return stage

    return _stages(drawn.rig, slower), f"actuator's lag +{more:.3g} s"


def operating_point(drawn: Drawn, interval: float, generator: np.random.Generator) -> Changed:
    """Another load: the same response takes another command, and a bent gain is another there.

    With x the deviation from the new balance, k(d + x)(1 + c(d + x)) less its value at d is k(1 + 2cd) x + k c x^2.
    """
    reach = 0.8 * drawn.amplitude
    load = float(generator.uniform(-reach, reach))
    bent = next(stage for stage in drawn.rig.stages if isinstance(stage, Gain))
    tilt = 1.0 + 2.0 * bent.bend * load
    at = bent.balance + load
    rig = _stages(
        drawn.rig, lambda stage: Gain(bent.gain * tilt, at, bent.bend / tilt) if stage is bent else stage
    )
    share = 100 * load / drawn.amplitude
    return replace(rig, command_rest=drawn.rig.command_rest + load), f"operating command by {share:+.0f} % of the test"


def slow_part(drawn: Drawn, interval: float, generator: np.random.Generator) -> Changed:
    """A slow part of 3 to 20 % that was not there: a wall that takes up heat, a seal that creeps."""
    if drawn.integrating or any(isinstance(stage, SlowShare) for stage in drawn.rig.stages):
        return None
    share, slow = generator.uniform(0.03, 0.2), drawn.base * generator.uniform(1.5, 4.0)
    return replace(drawn.rig, stages=(*drawn.rig.stages, SlowShare(share, slow))), f"slow part of {100 * share:.0f} %"


CHANGES: dict[str, Callable[[Drawn, float, np.random.Generator], Changed]] = {
    "gain": gain,
    "frequency": frequency,
    "damping": damping,
    "lag": lag,
    "dead time": dead_time,
    "one sample": one_sample,
    "friction": friction,
    "actuator": actuator,
    "operating point": operating_point,
    "slow part": slow_part,
}


def draw_change(drawn: Drawn, interval: float, generator: np.random.Generator) -> tuple[str, TrueRig, str]:
    """Kind, changed rig and size in words of a change that this rig can undergo.

    Parameters
    ----------
    interval : float, s
        Of the logger.
    """
    while True:
        kind = list(CHANGES)[generator.integers(len(CHANGES))]
        found = CHANGES[kind](drawn, interval, generator)
        if found is not None:
            return kind, *found
