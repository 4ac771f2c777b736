"""Where the loop rests before and after the step, plant by plant, and the error that remains."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ..ident.run import FloatArray
from .discretise import LawColumns
from .sampled.bank import Bank, IndexArray


@dataclass(frozen=True, eq=False)
class Rest:
    """A steady state of each column, in deviations from the operating point.

    Attributes
    ----------
    response, command : (c,) arrays
    """

    response: FloatArray
    command: FloatArray


def integrates(law: LawColumns) -> NDArray[np.bool_]:
    """(c,) bool: whether the law has integral action (its command coefficients sum to zero)."""
    return np.asarray(np.abs(law.command.sum(axis=0)) < 1e-12)


def rest_at(bank: Bank, which: IndexArray, law: LawColumns, setpoint: FloatArray, offset: FloatArray) -> Rest:
    """Steady state at a setpoint, nothing clamped.

    With integral action the response is the setpoint; else u = R r - S y with the law's static gains R, S, and
    y = g (u + offset) for a static plant, u = -offset for an integrating one.

    Parameters
    ----------
    offset : (c,) array, command unit
        Used operating command less the one that holds this plant.
    """
    sums = law.command.sum(axis=0)
    active = integrates(law)
    below = np.where(active, 1.0, sums)
    feedback, feedforward = law.response.sum(axis=0) / below, law.setpoint.sum(axis=0) / below
    moving = bank.integrators[which] > 0
    gain = bank.static_gain[which]
    with np.errstate(divide="ignore", invalid="ignore"):
        settled = gain * (feedforward * setpoint + offset) / (1.0 + gain * feedback)
        drifting = (feedforward * setpoint + offset) / feedback
        response = np.where(active, setpoint, np.where(moving, drifting, settled))
        command = np.where(moving, -offset, response / gain - offset)
    return Rest(response, command)


def stiction_error(bank: Bank, which: IndexArray, law: LawColumns, stiction: FloatArray) -> FloatArray:
    """(c,) error that friction leaves without integral action, response unit; 0 with it."""
    active = integrates(law)
    feedback = np.abs(law.response.sum(axis=0) / np.where(active, 1.0, law.command.sum(axis=0)))
    gain = np.abs(bank.static_gain[which])
    with np.errstate(divide="ignore"):
        held = np.where(bank.integrators[which] > 0, stiction / feedback, stiction * gain / (1.0 + gain * feedback))
    return np.where(active, 0.0, held)
