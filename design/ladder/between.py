"""A ladder from the gains that the controller runs with now to new ones, after a change of the rig."""

import math
from dataclasses import replace

import numpy as np

from ..compensator import loop_gain
from ..gains import Gains
from .climb import Field, Step
from .margins import floors_beside, keeps, on_plants
from .rung import LARGEST_STEP

_DIGITS = 5
_MOST = 12


def between(old: Gains, new: Gains, everyone: Field) -> list[Step] | None:
    """From the old gains to the new ones in even ratios of at most 1.5, or None where that can't be done.

    It can't where the structures or signs differ, where the old gains are the stronger ones (nothing is climbed by
    beginning above the target), or where one of the controllers in between (the old gains among
    them) misses a floor on some plausible plant: then a ladder starts from nothing.
    """
    if old.structure != new.structure or loop_gain(old) * loop_gain(new) <= 0.0:
        return None
    if abs(loop_gain(old)) > abs(loop_gain(new)):
        return None
    ratios = [ratio for name in ("proportional", "integral", "derivative") if (ratio := _ratio(old, new, name))]
    if not ratios or math.inf in ratios:
        return None
    count = max(math.ceil(max(ratios) / math.log(LARGEST_STEP) - 1e-9), 1)
    if count > _MOST:
        return None
    last = on_plants(everyone.spectra, new)
    floors = floors_beside(last, 0.0)
    steps = []
    for k in range(count):
        gains = old if k == 0 else _mixed(old, new, k / count)
        margins = on_plants(everyone.spectra, gains)
        if not np.all(keeps(margins, floors)):
            return None
        steps.append(Step(gains, abs(loop_gain(gains) / loop_gain(new)), margins, 1.0))
    return [*steps, Step(new, 1.0, last, 1.0)]


def _ratio(old: Gains, new: Gains, name: str) -> float:
    """|ln| of new over old; 0 where neither has the part, infinite where one alone has it."""
    a, b = getattr(old, name), getattr(new, name)
    if a == 0.0 and b == 0.0:
        return 0.0
    return abs(math.log(b / a)) if a * b > 0.0 else math.inf


def _mixed(old: Gains, new: Gains, share: float) -> Gains:
    """Geometric middle in every number that both have."""

    def mix(name: str) -> float:
        a, b = float(getattr(old, name) or 0.0), float(getattr(new, name) or 0.0)
        return float(f"{a * (b / a) ** share:.{_DIGITS}g}") if a * b > 0.0 else b

    network = new.structure in ("lead", "lag", "lead-lag")
    double = new.structure == "lead-lag"
    return replace(
        new,
        proportional=mix("proportional"),
        integral=mix("integral"),
        derivative=mix("derivative"),
        filter_time=mix("filter_time"),
        setpoint_weight=round((1.0 - share) * old.setpoint_weight + share * new.setpoint_weight, 2),
        zero=mix("zero") if network else None,
        pole=mix("pole") if network else None,
        second_zero=mix("second_zero") if double else None,
        second_pole=mix("second_pole") if double else None,
    )
