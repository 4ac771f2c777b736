"""The controllers between nothing and the target: gain in small steps, integral and derivative so that damping is kept.

With the share a of the target's proportional gain a rung has a^p of its integral and a^q of its derivative. On an
integrator the damping of a PI stays when the integral falls with the square of the gain (p = 2); on a double
integrator that of a PID stays with p = 3/2, q = 1/2 (time scaled by the root of a); on a plant that settles both may
simply follow (p = q = 1). Which powers hold is found by trial on the plants, the smallest reduction first.
"""

from collections.abc import Iterator
from dataclasses import dataclass, replace
from functools import cached_property
from itertools import product

import numpy as np

from ...ident.fitted import Plausible
from ..continuous import half_held
from ..gains import Gains
from ..sampled.bank import Bank, build_bank
from ..sampled.frequency import Margins, Spectra, spectra_of
from ..situation import Situation
from .margins import Floors, damping_of, floors_beside, grid_of_margins, keeps, on_plants

RUNGS = 5
LEAST_SHARE = 0.2  # of the target's gain on the first rung: four steps of 1.495
_INTEGRAL_POWERS = (1.0, 1.25, 1.5, 1.75, 2.0, 2.5, 3.0)
_DERIVATIVE_POWERS = (1.0, 0.75, 0.5, 0.25, 0.0)
_DIGITS = 5
_FEW = 11
_GRID = 60
_TRIES = 4


@dataclass(frozen=True, eq=False)
class Field:
    """Plants that rungs are tried on, ready for any law."""

    spectra: Spectra
    bank: Bank
    coarse: Bank

    @cached_property
    def unstable(self) -> bool:
        """Whether some plant runs away by itself."""
        return bool(np.any(self.spectra.unstable > 0))


@dataclass(frozen=True, eq=False)
class Step:
    """One controller between, with what it keeps.

    Attributes
    ----------
    gains : Gains
    share : float
    margins : Margins
        On all the plants.
    damping : float
        On the few.
    """

    gains: Gains
    share: float
    margins: Margins
    damping: float


def field_of(plausible: Plausible, situation: Situation) -> Field:
    """Discretise plants for margins and poles."""
    setting = situation.setting

    def bank(interval: float) -> Bank:
        delay = half_held(setting, interval)
        filter_time = setting.response_filter_time
        return build_bank(plausible.plants, interval, computation_delay=delay, filter_time=filter_time, points=1)

    exact = bank(setting.update_interval)
    coarse = exact if exact.lag.max() <= 8 else bank(float(exact.delay.max()) / 6)
    return Field(spectra_of(exact, _GRID), exact, coarse)


def few_of(plausible: Plausible, chosen: list[int]) -> Plausible:
    """The first plant, some spread evenly over the rest, and those chosen."""
    even = np.linspace(0, len(plausible.plants) - 1, _FEW).astype(int).tolist()
    return plausible.take(sorted({0, *even, *chosen}))


def shares() -> tuple[float, ...]:
    """Shares of the target's gain, rising to one.

    Examples
    --------
    >>> [round(share, 3) for share in shares()]
    [0.2, 0.299, 0.447, 0.669, 1.0]
    """
    return tuple(float(LEAST_SHARE ** ((RUNGS - 1 - k) / (RUNGS - 1))) for k in range(RUNGS))


def climb(target: Gains, plausible: Plausible, everyone: Field, situation: Situation) -> list[Step] | float:
    """Rungs up to the target, or the share of the gain for which no controller keeps the floors on every plant.

    Parameters
    ----------
    plausible : Plausible
        The fitted plant first; the same plants as in `everyone`.
    """
    few = field_of(few_of(plausible, []), situation)
    last = on_plants(everyone.spectra, target)
    floors = floors_beside(last, damping_of(few.spectra, few.bank, few.coarse, target))
    steps: list[Step] = []
    for share in shares()[:-1]:
        step = _rung(target, share, plausible, few, everyone, floors, situation)
        if step is None:
            return share
        steps.append(step)
    return [*steps, Step(target, 1.0, last, damping_of(few.spectra, few.bank, few.coarse, target))]


def _rung(
    target: Gains,
    share: float,
    plausible: Plausible,
    few: Field,
    everyone: Field,
    floors: Floors,
    situation: Situation,
) -> Step | None:
    """Chosen on few plants, then held against all; where it fails there, the failing ones join the few."""
    for _ in range(_TRIES):
        found = _first_that_keeps(list(candidates(target, share)), few, floors)
        if found is None:
            return None
        gains, damping = found
        margins = on_plants(everyone.spectra, gains)
        kept = keeps(margins, floors)
        if kept.all():
            return Step(gains, share, margins, damping)
        worst = np.flatnonzero(~kept)[np.argsort(margins.phase[~kept], kind="stable")[:4]]
        few = field_of(few_of(plausible, worst.tolist()), situation)
    return None


def candidates(target: Gains, share: float) -> Iterator[Gains]:
    """Controllers of this share of the gain, the smallest reduction of integral and derivative first."""
    integral = _INTEGRAL_POWERS if target.integral and target.structure != "I" else (1.0,)
    derivative = _DERIVATIVE_POWERS if target.derivative else (1.0,)
    for p, q in sorted(product(integral, derivative), key=lambda pair: (pair[0] - 1.0) + (1.0 - pair[1])):
        yield replace(
            target,
            proportional=_cut(target.proportional * share),
            integral=_cut(target.integral * share**p),
            derivative=_cut(target.derivative * share**q),
        )


def _cut(value: float) -> float:
    return float(f"{value:.{_DIGITS}g}")


def _first_that_keeps(tried: list[Gains], few: Field, floors: Floors) -> tuple[Gains, float] | None:
    margins, _ = grid_of_margins(few.spectra, tried)
    count = few.spectra.plant.shape[1]
    good = keeps(margins, floors).reshape(len(tried), count).all(axis=1)
    for place in np.flatnonzero(good):
        damping = damping_of(few.spectra, few.bank, few.coarse, tried[place])
        if damping >= floors.damping:
            return tried[place], damping
    return None
