"""Margins of many rungs on many plausible plants: the lowest of each, and what no rung may fall below."""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from ..discretise import columns_of, law_columns
from ..gains import Gains
from ..sampled.bank import Bank
from ..sampled.frequency import Margins, Spectra, margins_of
from ..sampled.poles import poles_of, starting_poles

GAIN_MARGIN_DB, PHASE_MARGIN_DEG, SENSITIVITY = 6.0, 30.0, 2.0  # common practice, no source
_KEPT = 0.95  # share of the target's damping that a rung keeps
_ALMOST = 1e-6


@dataclass(frozen=True)
class Floors:
    """What each rung must keep on every plant: the usual floors, or what the target has where that is less.

    Attributes
    ----------
    gain : float, dB
    phase : float, deg
    sensitivity : float
    damping : float
    """

    gain: float = GAIN_MARGIN_DB
    phase: float = PHASE_MARGIN_DEG
    sensitivity: float = SENSITIVITY
    damping: float = 0.0


def on_plants(spectra: Spectra, gains: Gains) -> Margins:
    """Margins of one controller on every plant of the spectra."""
    count = spectra.plant.shape[1]
    law = law_columns(columns_of([gains]), spectra.interval).take(np.zeros(count, dtype=int))
    return margins_of(spectra, np.arange(count), law)


def grid_of_margins(spectra: Spectra, candidates: Sequence[Gains]) -> tuple[Margins, np.ndarray]:
    """Margins of each candidate on each plant, candidate by candidate, and the (c,) plants they belong to."""
    count = spectra.plant.shape[1]
    which = np.tile(np.arange(count), len(candidates))
    law = law_columns(columns_of(candidates), spectra.interval)
    spread = law.take(np.repeat(np.arange(len(candidates)), count))
    return margins_of(spectra, which, spread, exact=False), which


def damping_of(spectra: Spectra, bank: Bank, coarse: Bank, gains: Gains) -> float:
    """Lowest damping ratio over the plants, of the pole pairs that show in the response."""
    count = spectra.plant.shape[1]
    which, same = np.arange(count), np.zeros(count, dtype=int)
    law = law_columns(columns_of([gains]), spectra.interval).take(same)
    slow = law_columns(columns_of([gains]), coarse.interval).take(same)
    starts = starting_poles(coarse, which, slow)
    return float(poles_of(spectra, which, law, starts, bank.delay).damping.min())


def floors_beside(target: Margins, damping: float) -> Floors:
    """The floors for rungs below this target."""
    return Floors(
        min(GAIN_MARGIN_DB, float(target.gain.min()) - _ALMOST),
        min(PHASE_MARGIN_DEG, float(target.phase.min()) - _ALMOST),
        max(SENSITIVITY, float(target.sensitivity.max()) + _ALMOST),
        _KEPT * min(damping, 1.0),
    )


def keeps(found: Margins, floors: Floors) -> np.ndarray:
    """(c,) bool: stable, with every margin at its floor or better."""
    return np.asarray(
        found.stable
        & (found.gain >= floors.gain)
        & (found.phase >= floors.phase)
        & (found.sensitivity <= floors.sensitivity)
    )


def less_gain_is_safer(spectra: Spectra, gains: Gains) -> bool:
    """Whether the loop without its integral stays stable at every smaller gain, on every plant.

    The integral is left out because each rung has its own, smaller one; a loop that needs a least gain even so is
    conditionally stable.
    """
    bare = gains if gains.structure == "I" else replace(gains, integral=0.0)
    found = on_plants(spectra, bare)
    return bool(np.all(found.stable & (found.lower == 0.0)))
