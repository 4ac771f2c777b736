"""Rung 0: how far to move the command with the loop open, and what the response must do if all is wired right."""

import numpy as np

from ...ident.fitted import Plausible
from ...ident.run import FloatArray
from ..discretise import LawColumns
from ..horizon import natural_time
from ..requirements import Limits
from ..sampled.around import run_around
from ..sampled.bank import build_bank
from ..sampled.loop import Clamps
from ..situation import Situation
from .rung import Band, FirstMove, Spread

_SHARE = 0.25  # of the test step, and of the room that the command has
_NOISES = 12.0  # of the noise, where no test step says how far to go
_SEEN = 6.0  # of the noise: a smaller move is not seen for sure
_NORMAL_999 = 3.2905  # standard deviations that hold 99.9 %: exact law
_SAMPLES = 120
_LONGEST = 8.0  # natural times that an integrating plant may be given to get there


def first_move(plausible: Plausible, situation: Situation, noise_std: float) -> FirstMove | None:
    """The move, and the response to expect from it; None where neither a test step nor noise says how far to go.

    Parameters
    ----------
    plausible : Plausible
        The fitted plant first.
    """
    goal = _goal(situation, noise_std)
    if goal == 0.0:
        return None
    within = natural_time(plausible.plants[0], situation)
    size, within = _size(plausible, situation, goal, within)
    time, moved = _moved(plausible, situation, size, within)
    spread = np.sqrt(moved.std(axis=1) ** 2 + 2.0 * noise_std**2)
    start, end = situation.operating_response, moved[-1]
    low, high = np.quantile(end, [0.025, 0.975])
    fitted = float(end[0])
    worst = abs(fitted) - _NORMAL_999 * float(spread[-1])
    return FirstMove(
        situation.operating_command,
        situation.operating_command + size,
        start,
        Spread(fitted, float(low), float(high)),
        max(worst, 0.3 * abs(fitted)),
        within,
        Band(time, start + moved[:, 0], *_around(start + moved, spread)),
        bool(abs(fitted) >= _SEEN * noise_std),
    )


def _around(response: FloatArray, spread: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Lower and upper end of the 99.9 % band; it holds every plant that was run."""
    middle = response.mean(axis=1)
    low = np.minimum(middle - _NORMAL_999 * spread, response.min(axis=1))
    return low, np.maximum(middle + _NORMAL_999 * spread, response.max(axis=1))


def _goal(situation: Situation, noise_std: float) -> float:
    """How far the response should move, sign included; where no step was stated, up."""
    return _SHARE * situation.step if situation.step else _NOISES * noise_std


def _size(plausible: Plausible, situation: Situation, goal: float, within: float) -> tuple[float, float]:
    """Change of the command, and the time it is given: longer where the room of the command is short."""
    nominal, stiction = plausible.plants[0], float(np.median(plausible.stiction))
    _, unit = _moved(plausible.take([0]), situation, 1.0, within, smooth=True)
    reach = float(unit[-1, 0])
    wanted = goal / reach if reach else 0.0
    held = float(np.copysign(stiction, wanted))
    room = _SHARE * _room(situation.limits, situation.operating_command, wanted)
    if abs(wanted + held) <= room:
        return wanted + held, within
    if nominal.integrators:
        stretched = min(abs(wanted) / max(room - stiction, 1e-300), _LONGEST)
        return float(np.copysign(room, wanted)), within * stretched
    return float(np.copysign(room, wanted)), within


def _room(limits: Limits, command: float, way: float) -> float:
    bound = limits.command_highest if way > 0.0 else limits.command_lowest
    return np.inf if bound is None or not np.isfinite(bound) else abs(bound - command)


def _moved(
    plausible: Plausible, situation: Situation, size: float, within: float, *, smooth: bool = False
) -> tuple[FloatArray, FloatArray]:
    """(n,) times and (n, p) moves of the response after a step of the command, friction included."""
    interval = within / _SAMPLES
    bank = build_bank(plausible.plants, interval, points=1, stiction=None if smooth else plausible.stiction)
    count = len(plausible.plants)
    drift = np.where(bank.integrators > 0, situation.operating_command - plausible.operating_command, 0.0)
    push = size + (0.0 if smooth else drift)
    history = run_around(
        bank,
        np.arange(count),
        _open(count),
        setpoint=np.zeros(count),
        disturbance=np.broadcast_to(push, (count,)).astype(float),
        clamps=Clamps(np.full(count, -np.inf), np.full(count, np.inf)),
        samples=_SAMPLES,
    )
    time = interval * np.arange(1, _SAMPLES + 1)
    return np.concatenate([[0.0], time]), np.vstack([np.zeros(count), history.response])


def _open(count: int) -> LawColumns:
    """A controller that does nothing."""
    one = np.tile(np.array([[1.0], [0.0], [0.0]]), count)
    return LawColumns(one, 0.0 * one, 0.0 * one, one)
