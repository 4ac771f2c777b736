"""The sampled law around plants while the setpoint moves as it was logged."""

import numpy as np

from ...ident.bend import curved
from ...ident.run import FloatArray
from ..discretise import LawColumns
from .around import held_by_friction
from .bank import Bank, IndexArray
from .loop import Clamps, followed


def follow(bank: Bank, law: LawColumns, setpoint: FloatArray, clamps: Clamps) -> tuple[FloatArray, FloatArray]:
    """Responses and commands at the controller's samples, from rest, in deviations from there.

    Parameters
    ----------
    bank : Bank
        p plants at the law's interval, one sub-point a sample.
    law : LawColumns, p columns
    setpoint : (n,) array, response unit
        At each sample, less what it was at rest.
    clamps : Clamps, p columns

    Returns
    -------
    response, command : (n, p) arrays
        As the controller meets them: the response of a sample before its command acts.
    """
    count = bank.lag.size
    response, command = np.empty((setpoint.size, count)), np.empty((setpoint.size, count))
    rough = held_by_friction(bank, np.arange(count))
    for held in (False, True):
        chosen = np.flatnonzero(rough == held)
        if chosen.size:
            part = Clamps(clamps.lowest[chosen], clamps.highest[chosen], clamps.change)
            one = _Follower(bank, chosen, law.take(chosen), part, held)
            response[:, chosen], command[:, chosen] = one.run(setpoint)
    return response, command


class _Follower:
    """The law in transposed form with two stored sums; the plant by its matrices or, held by friction, in phases."""

    def __init__(self, bank: Bank, chosen: IndexArray, law: LawColumns, clamps: Clamps, held: bool) -> None:
        self.bank, self.law, self.clamps, self.held = bank, law, clamps, held
        self.lag, self.states = bank.lag[chosen], bank.states
        self.step = bank.step[:, :, chosen]
        self.drives = bank.drives.take(chosen) if held and bank.drives is not None else None
        part = np.maximum(bank.delay[chosen] - self.lag * bank.interval, 0.0)
        self.old_share = np.minimum(part, bank.interval)
        self.valves = None if bank.valves is None else bank.valves[:, chosen]
        self.curves = None if bank.curves is None else bank.curves[:, chosen]
        self.stem = np.zeros(chosen.size)

    def run(self, setpoint: FloatArray) -> tuple[FloatArray, FloatArray]:
        count, samples = self.lag.size, setpoint.size
        depth = int(self.lag.max(initial=0)) + 1
        sent, columns = np.zeros((samples + depth, count)), np.arange(count)
        responses, commands = np.empty((samples, count)), np.empty((samples, count))
        law, ahead = self.law, self.law.memory[1:] - self.law.command[1:]
        first = second = before = seen = np.zeros(count)
        self.state, self.speed, self.place = np.zeros((self.states, count)), np.zeros(count), np.zeros(count)
        for k in range(samples):
            goal = law.setpoint * setpoint[k]
            wanted = first + goal[0] - law.response[0] * seen
            low = np.maximum(self.clamps.lowest, before - self.clamps.change)
            high = np.minimum(self.clamps.highest, before + self.clamps.change)
            before = np.minimum(np.maximum(wanted, low), high)
            responses[k], commands[k], sent[k + depth] = seen, before, self._through(before)
            first = second + goal[1] - law.response[1] * seen + ahead[0] * before - law.memory[1] * wanted
            second = goal[2] - law.response[2] * seen + ahead[1] * before - law.memory[2] * wanted
            new, old = sent[k + depth - self.lag, columns], sent[k + depth - self.lag - 1, columns]
            seen = self._held(old, new) if self.held else self._smooth(old, new)
        return responses, commands

    def _through(self, given: FloatArray) -> FloatArray:
        if self.curves is not None:
            given = curved(self.curves[0], given) / self.curves[1]
        if self.valves is None:
            return given
        band, short, above = self.valves
        self.stem = followed(self.stem, given + above, band, short)
        return self.stem

    def _smooth(self, old: FloatArray, new: FloatArray) -> FloatArray:
        out = np.einsum("ijc,jc->ic", self.step, np.vstack([self.state, old, new]))
        self.state = out[self.bank.points :]
        return np.asarray(self.state[-1] if self.bank.filtered else out[self.bank.points - 1])

    def _held(self, old: FloatArray, new: FloatArray) -> FloatArray:
        assert self.drives is not None
        self.speed, moved = self.drives.walked(self.speed, old, self.old_share)
        self.speed, more = self.drives.walked(self.speed, new, self.bank.interval - self.old_share)
        self.place = self.place + moved + more
        return self.place
