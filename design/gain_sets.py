"""Every loop gain at which the requirements hold on the fitted plant, zeros fixed."""

import math
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from ..ident.run import FloatArray
from .designed import GainInterval
from .discretise import GainColumns
from .locus.loop import OpenLoop
from .requirements import Requirement
from .sets.curve import Curve, continuous_curve, sampled_curve
from .sets.frequency import gain_margin_set, phase_margin_set, sensitivity_set
from .sets.spans import Span, both
from .sets.time import scanned_sets
from .situation import MARGINS
from .slack import UNSTABLE, requirement_slack
from .values import Bench, values_of

_LINEAR = ("command_noise", "damping_ratio", "ramp_error")
_SWINGING = ("settling_time", "disturbance_recovery")
_IN_LINE, _IN_TIME = 1e-11, 3e-8  # relative widths at which edges are known
_FAITHFUL = 0.1  # of the gain at which the stand-in of a continuous loop becomes unstable: as far as it is believed


@dataclass(frozen=True)
class GainSets:
    """Intervals of the loop gain K.

    Attributes
    ----------
    rows : tuple of (name, intervals)
        Each stated requirement by itself, within stability.
    together : tuple of GainInterval
        All of them; every stable K where nothing is stated.
    """

    rows: tuple[tuple[str, tuple[GainInterval, ...]], ...]
    together: tuple[GainInterval, ...]


def fitted_sets(bench: Bench, gains: GainColumns, chosen: float, loop: OpenLoop | None = None) -> GainSets:
    """Intervals for plant 0 of the bench.

    Parameters
    ----------
    gains : GainColumns of one column
    chosen : float
        Loop gain K > 0 of these gains; the intervals are given in K.
    loop : OpenLoop, optional
        The loop itself, where the controller is continuous and the bench a stand-in.

    Notes
    -----
    Stability and margins hold on known arcs of the loop's curve, to rounding. The others are closed in where a measure
    without jumps passes its bound.
    """
    curve = sampled_curve(bench, gains) if loop is None else continuous_curve(loop, chosen)
    reach = math.inf if loop is None else _believed(curve, sampled_curve(bench, gains))
    found: dict[str, tuple[Span, ...]] = {}
    items = bench.situation.requirements.items
    for item in items:
        if item.name in MARGINS:
            found[item.name] = _margin_set(curve, item)
    for linear, tight in ((True, _IN_LINE), (False, _IN_TIME)):
        some = [item for item in items if item.name not in MARGINS and (item.name in _LINEAR) == linear]
        if some:
            swinging = [i for i, item in enumerate(some) if item.name in _SWINGING]
            measure = _measure(bench, gains, some)
            sets = scanned_sets(measure, curve.stable, len(some), tight=tight, reach=reach, swinging=swinging)
            found |= {item.name: spans for item, spans in zip(some, sets, strict=True)}
    together = curve.stable
    for spans in found.values():
        together = both(together, spans)
    rows = tuple((item.name, _scaled(found[item.name], chosen)) for item in items)
    return GainSets(rows, _scaled(together, chosen))


def believed_up_to(bench: Bench, gains: GainColumns, chosen: float, loop: OpenLoop) -> float:
    """Factor on the gain up to which the bench may stand in for a continuous loop; inf: without end.

    Parameters
    ----------
    gains : GainColumns of one column
    chosen : float
        Their K.
    loop : OpenLoop
        The continuous loop.
    """
    return _believed(continuous_curve(loop, chosen), sampled_curve(bench, gains))


def _believed(curve: Curve, stand_in: Curve) -> float:
    """Up to which factor the stand-in may be run: without end where it becomes unstable with the loop itself."""
    own, last = (max((high for _, high in each.stable), default=1.0) for each in (curve, stand_in))
    return math.inf if own < 2.0 * last else _FAITHFUL * last


def _margin_set(curve: Curve, item: Requirement) -> tuple[Span, ...]:
    if item.name == "gain_margin":
        return gain_margin_set(curve, item.limit)
    if item.name == "phase_margin":
        return phase_margin_set(curve, item.limit)
    return sensitivity_set(curve, item.limit)


def _measure(bench: Bench, gains: GainColumns, items: list[Requirement]) -> Callable[[FloatArray], FloatArray]:
    """(g,) factors to (items, g) measures without jumps, at most 0 where the item holds."""
    alone = replace(bench.situation.requirements, items=tuple(items))
    some = replace(bench, situation=replace(bench.situation, requirements=alone), graded=True)

    def measure(factors: FloatArray) -> FloatArray:
        zeros = np.zeros(factors.size, dtype=int)
        values = values_of(some, zeros, gains.take(zeros).times(factors))
        lost = np.full(factors.size, np.nan)
        rows = [
            values.graded[item.name]
            if item.name in values.graded
            else -requirement_slack(item, values.of.get(item.name, lost))
            for item in items
        ]
        return np.where(values.stable, np.array(rows), -UNSTABLE)

    return measure


def _scaled(spans: tuple[Span, ...], chosen: float) -> tuple[GainInterval, ...]:
    return tuple((low * chosen, None if math.isinf(high) else high * chosen) for low, high in spans)
