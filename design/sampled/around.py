"""Run the sampled law around whatever the plants are: smooth ones by matrices, drives with friction in closed form."""

import numpy as np

from ...ident.run import FloatArray
from ..discretise import LawColumns
from .bank import Bank, IndexArray
from .loop import Clamps, History, simulate
from .rough import simulate_rough


def held_by_friction(bank: Bank, which: IndexArray) -> np.ndarray:
    """(c,) bool: whether friction holds the plant of each column."""
    if bank.drives is None:
        return np.zeros(which.size, dtype=bool)
    return np.asarray(bank.drives.friction[which] > 0.0)


def held_by_valve(bank: Bank, which: IndexArray) -> np.ndarray:
    """(c,) bool: whether a valve that sticks stands before the plant of each column."""
    if bank.valves is None:
        return np.zeros(which.size, dtype=bool)
    return np.asarray(bank.valves[0, which] > 0.0)


def run_around(
    bank: Bank,
    which: IndexArray,
    law: LawColumns,
    *,
    setpoint: FloatArray,
    disturbance: FloatArray,
    clamps: Clamps,
    samples: int,
    rates: bool = False,
) -> History:
    """The history of every column, as `simulate` gives it, with the friction of those plants that have it."""
    rough = held_by_friction(bank, which)
    if not rough.any():
        return simulate(
            bank, which, law, setpoint=setpoint, disturbance=disturbance, clamps=clamps, samples=samples, rates=rates
        )
    parts = [
        (index, _some(bank, index, which, law, setpoint, disturbance, clamps, samples, rates, bool(held)))
        for held in (False, True)
        if (index := np.flatnonzero(rough == held)).size
    ]
    return _joined(parts, which.size, samples, bank.points, rates)


def _some(
    bank: Bank,
    index: IndexArray,
    which: IndexArray,
    law: LawColumns,
    setpoint: FloatArray,
    disturbance: FloatArray,
    clamps: Clamps,
    samples: int,
    rates: bool,
    held: bool,
) -> History:
    some, part = which[index], law.take(index)
    bounds = Clamps(clamps.lowest[index], clamps.highest[index], clamps.change)
    step, push = setpoint[index], disturbance[index]
    if held and bank.drives is not None:
        return simulate_rough(
            bank.drives.take(some),
            part,
            interval=bank.interval,
            points=bank.points,
            filter_time=bank.filter_time,
            setpoint=step,
            disturbance=push,
            clamps=bounds,
            samples=samples,
        )
    return simulate(bank, some, part, setpoint=step, disturbance=push, clamps=bounds, samples=samples, rates=rates)


def _joined(parts: list[tuple[IndexArray, History]], count: int, samples: int, points: int, rates: bool) -> History:
    response, command = np.empty((samples * points, count)), np.empty((samples, count))
    limited, rate = np.zeros((samples, count), dtype=bool), np.zeros(count)
    for index, history in parts:
        response[:, index], command[:, index] = history.response, history.command
        if history.limited is not None:
            limited[:, index] = history.limited
        if history.rate is not None:
            rate[index] = history.rate
    return History(response, command, limited, rate if rates else None)
