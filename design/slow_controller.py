"""Whether the controller samples often enough for the loop that it closes, and the interval that it would need."""

import math

from ..ident.plant import Plant
from .compensator import loop_gain, open_loop
from .gains import Gains
from .locus.condition import LocusError
from .locus.crossings import axis_crossings
from .requirements import ControllerSetting

FEW, COMFORTABLE = 10.0, 20.0  # samples in an ultimate period; common practice, no source


def ultimate_period(gains: Gains, plant: Plant, setting: ControllerSetting) -> float:
    """Period in s of the swing at the first gain above the chosen one that is too much; inf where none is.

    Exact dead time and hold, zeros fixed.
    """
    chosen = abs(loop_gain(gains))
    try:
        crossings = axis_crossings(open_loop(gains, plant, setting), 1.01 * chosen)
    except LocusError:
        return math.inf
    above = [c for c in crossings if c.loop_gain > chosen and c.direction > 0 and 0.0 < c.frequency < math.inf]
    return 2.0 * math.pi / min(above, key=lambda c: c.loop_gain).frequency if above else math.inf


def slow_controller(gains: Gains, plant: Plant, setting: ControllerSetting) -> tuple[str, ...]:
    """A caution with numbers where fewer than ten samples fall into an ultimate period; empty else."""
    if setting.continuous:
        return ()
    period = ultimate_period(gains, plant, setting)
    samples = period / setting.update_interval
    if samples >= FEW:
        return ()
    return (
        f"the controller is slow for this loop: {samples:.2g} samples fall into its ultimate period of {period:.3g} s; "
        f"an update interval of {period / FEW:.2g} s gives {FEW:g}, one of {period / COMFORTABLE:.2g} s a comfortable "
        f"{COMFORTABLE:g} (a shorter one would allow a quicker loop, too)",
    )
