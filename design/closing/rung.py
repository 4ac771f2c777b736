"""A rung's log against its prediction: climb, repeat or stop."""

from dataclasses import dataclass
from itertools import pairwise
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from scipy.ndimage import maximum_filter1d, minimum_filter1d

from ...ident.fitted import Plausible
from ...ident.law import Law
from ...ident.plant import Plant
from ...ident.run import FloatArray, Run
from ..continuous import half_held
from ..discretise import columns_of_law
from ..ladder.rung import RESPONSE_TIMES, SWINGS
from ..requirements import ControllerSetting, Limits
from ..sampled.bank import build_bank
from ..sampled.follow import follow
from ..sampled.loop import Clamps
from ..steady import rest_at

Advice = Literal["climb", "repeat", "stop"]
_PLANTS = 120
_NORMAL_999 = 3.2905  # standard deviations that hold 99.9 %: exact law
_NOISES = 6.0  # of the noise: less is no movement
_HALF = 0.5  # of the rung's step: a smaller one shows too little
_OUTSIDE = 0.02  # of the samples: more is worth another run


@dataclass(frozen=True, eq=False)
class RungRun:
    """One rung's log and what its loop should have done under the logged setpoint.

    Attributes
    ----------
    label : str
    time, response, command, setpoint : (n,) arrays; s, response unit, command unit, response unit
    predicted, low, high : (n,) arrays, response unit
        Of the fitted plant; the band holds 99.9 %, plants and noise together, a sample of the controller either way.
    outside : float
        Share of the samples outside the band.
    advice : {"climb", "repeat", "stop"}
    why : str
    """

    label: str
    time: FloatArray
    response: FloatArray
    command: FloatArray
    setpoint: FloatArray
    predicted: FloatArray
    low: FloatArray
    high: FloatArray
    outside: float
    advice: Advice
    why: str


@dataclass(frozen=True)
class RungAsked:
    """What is known of a rung before its log is read.

    Attributes
    ----------
    law : Law
        Of a continuous controller: the fine one that stands in for it.
    step : float or None, response unit
        Of the setpoint, as the ladder asks for it.
    response_time, settling_time : float or None, s
    """

    law: Law
    step: float | None
    response_time: float | None
    settling_time: float | None


def judge_rung(
    run: Run,
    asked: RungAsked,
    nominal: Plant,
    plausible: Plausible,
    *,
    operating_command: float,
    operating_response: float,
    noise_std: float,
    limits: Limits,
    setting: ControllerSetting,
) -> RungRun:
    """Run the rung's law around the plants under the logged setpoint and hold the log against it.

    Parameters
    ----------
    run : Run
        Taken with this rung's gains, its setpoint logged, beginning at rest.

    Raises
    ------
    ValueError
        The run has no setpoint.
    """
    if run.setpoint is None:
        raise ValueError("a rung's run needs its setpoint")
    some = _with_fitted(nominal, plausible, operating_command)
    time, response = _simulated(run.time, run.setpoint, asked.law, some, operating_command, operating_response, setting)
    spread = np.sqrt(response.std(axis=1) ** 2 + noise_std**2)
    middle = response.mean(axis=1)
    low = np.minimum(middle - _NORMAL_999 * spread, response.min(axis=1) - _NORMAL_999 * noise_std)
    high = np.maximum(middle + _NORMAL_999 * spread, response.max(axis=1) + _NORMAL_999 * noise_std)
    late = float(np.median(np.diff(run.time))) if setting.continuous else asked.law.update_interval
    samples = max(int(np.ceil(late / asked.law.update_interval - 1e-6)), 1)
    low, high = minimum_filter1d(low, 2 * samples + 1), maximum_filter1d(high, 2 * samples + 1)
    # nobody logs at which instant the controller took the setpoint over: a sample either way
    predicted, lowest, highest = (np.interp(run.time - run.time[0], time, line) for line in (response[:, 0], low, high))
    outside = np.isfinite(run.response) & ((run.response < lowest) | (run.response > highest))
    advice, why = _advice(run, run.setpoint, asked, outside, predicted, noise_std, limits)
    share = float(np.mean(outside[run.valid])) if run.valid.any() else 1.0
    return RungRun(
        run.label,
        run.time,
        run.response,
        run.command,
        run.setpoint,
        predicted,
        lowest,
        highest,
        share,
        advice,
        why,
    )


def _with_fitted(nominal: Plant, plausible: Plausible, command: float) -> Plausible:
    count = len(plausible.plants)
    some = plausible.take(np.unique(np.linspace(0, count - 1, min(count, _PLANTS)).astype(int)).tolist())
    return some.led_by(nominal, command)


def _simulated(
    logged: FloatArray,
    setpoint: FloatArray,
    law: Law,
    plausible: Plausible,
    operating_command: float,
    operating_response: float,
    setting: ControllerSetting,
) -> tuple[FloatArray, FloatArray]:
    """Times of the controller's samples and absolute responses there, a column a plant."""
    interval = law.update_interval
    time = interval * np.arange(int((logged[-1] - logged[0]) / interval) + 1)
    latest = np.searchsorted(logged - logged[0], time + 1e-9 * interval, side="right") - 1
    goal = setpoint[np.maximum(latest, 0)]
    bank = build_bank(
        plausible.plants,
        interval,
        computation_delay=half_held(setting, interval),
        filter_time=setting.response_filter_time,
        points=1,
        stiction=plausible.stiction,
        valves=plausible.valves,
        curves=plausible.curves,
        predict=setting.continuous,
    )
    count = len(plausible.plants)
    columns = columns_of_law(law).take(np.zeros(count, dtype=int))
    offset = operating_command - plausible.operating_command
    start = np.full(count, goal[0] - operating_response)
    rest = rest_at(bank, np.arange(count), columns, start, offset)
    low = -np.inf if law.clamp.lowest is None else law.clamp.lowest
    high = np.inf if law.clamp.highest is None else law.clamp.highest
    change = np.inf if law.clamp.rate is None else law.clamp.rate * interval
    clamps = Clamps(low - rest.command, high - rest.command, change)
    response, _ = follow(bank, columns, goal - goal[0], clamps)
    return np.asarray(time, dtype=np.float64), response + rest.response + operating_response


def _advice(
    run: Run,
    setpoint: FloatArray,
    asked: RungAsked,
    outside: NDArray[np.bool_],
    predicted: FloatArray,
    noise_std: float,
    limits: Limits,
) -> tuple[Advice, str]:
    stopped = [
        _limit_reached(run, limits),
        _too_long_outside(run, asked, outside),
        _growing(run, setpoint, noise_std),
        _frozen(run, predicted, noise_std),
    ]
    reasons = [reason for reason in stopped if reason]
    if reasons:
        return "stop", "; ".join(reasons)
    again = [_too_small(setpoint, asked), _too_short(run, setpoint, asked), _strayed(run, outside)]
    reasons = [reason for reason in again if reason]
    if reasons:
        return "repeat", "; ".join(reasons)
    return "climb", f"{100 * float(np.mean(~outside[run.valid])):.1f} % of the samples lie in the 99.9 % band"


def _limit_reached(run: Run, limits: Limits) -> str:
    """Readings at or beyond a limit; a command may stand on its bound, because the law clamps there."""
    for name, values, low, high in (
        ("response", run.response, limits.response_lowest, limits.response_highest),
        ("command", run.command, limits.command_lowest, limits.command_highest),
    ):
        room = 0.0 if name == "response" else 1e-6 * (abs(low or 0.0) + abs(high or 0.0))
        if high is not None and np.isfinite(high) and _most(values) > high + room:
            return f"the {name} passed its highest limit of {high:g}: {_most(values):.4g}"
        if low is not None and np.isfinite(low) and -_most(-values) < low - room:
            return f"the {name} passed its lowest limit of {low:g}: {-_most(-values):.4g}"
    return ""


def _most(values: FloatArray) -> float:
    known = values[np.isfinite(values)]
    return float(known.max()) if known.size else -np.inf


def _too_long_outside(run: Run, asked: RungAsked, outside: NDArray[np.bool_]) -> str:
    if asked.response_time is None:
        return ""
    longest, begins = 0.0, None
    for at, out in zip(run.time, outside, strict=True):
        begins = (at if begins is None else begins) if out else None
        longest = max(longest, float(at - begins) if begins is not None else 0.0)
    most = RESPONSE_TIMES * asked.response_time
    if longest <= most:
        return ""
    return f"the response stayed outside the 99.9 % band for {longest:.3g} s (more than {most:.3g} s)"


def _growing(run: Run, setpoint: FloatArray, noise_std: float) -> str:
    """Swings of the response about the setpoint since it last moved, each larger than the one before."""
    changed = np.flatnonzero(np.abs(np.diff(setpoint)) > 0.0)
    first = int(changed[-1]) + 1 if changed.size else 0
    away = (run.response - setpoint)[first:]
    sizes = swings(away[np.isfinite(away)], _NOISES * noise_std)
    for place in range(len(sizes) - SWINGS):
        part = sizes[place : place + SWINGS + 1]
        if all(later > 1.02 * earlier for earlier, later in pairwise(part)):
            return f"an oscillation grows: swings of {', '.join(f'{size:.3g}' for size in part)}"
    return ""


def swings(away: FloatArray, least: float) -> list[float]:
    """Sizes from one turning point to the next, where the movement reverses by more than `least`.

    Examples
    --------
    >>> swings(np.array([0.0, 1.0, -2.0, 3.0, 2.9, 3.1, 0.0]), 0.5)
    [1.0, 3.0, 5.1, 3.1]
    """
    if away.size == 0:
        return []
    turns, way, extreme = [float(away[0])], 0.0, float(away[0])
    for value in away[1:].tolist():
        if way == 0.0:
            way = np.sign(value - extreme) if abs(value - extreme) > least else 0.0
            extreme = value if way else extreme
        elif (value - extreme) * way > 0.0:
            extreme = value
        elif abs(value - extreme) > least:
            turns.append(extreme)
            way, extreme = -way, value
    return [round(abs(b - a), 12) for a, b in zip(turns, [*turns[1:], extreme], strict=True)]


def _frozen(run: Run, predicted: FloatArray, noise_std: float) -> str:
    known = run.response[run.valid]
    if not known.size or np.ptp(predicted) < 2.0 * _NOISES * noise_std:
        return ""
    moved, wanted = float(np.ptp(known)), float(np.ptp(predicted))
    if moved < max(_NOISES * noise_std, 0.02 * wanted):
        return f"the response is frozen: it moved by {moved:.3g} where {wanted:.3g} was expected"
    return ""


def _too_small(setpoint: FloatArray, asked: RungAsked) -> str:
    moved = float(np.ptp(setpoint))
    if moved == 0.0:
        return "the setpoint never moves in this log: step it as the ladder says"
    if asked.step is not None and moved < _HALF * abs(asked.step):
        return f"the setpoint moves by {moved:.3g} only, and the rung asks for {abs(asked.step):.3g}"
    return ""


def _too_short(run: Run, setpoint: FloatArray, asked: RungAsked) -> str:
    changed = np.flatnonzero(np.abs(np.diff(setpoint)) > 0.0)
    if asked.settling_time is None or not changed.size:
        return ""
    watched = float(run.time[-1] - run.time[changed[0]])
    if watched >= asked.settling_time:
        return ""
    return f"the log ends {watched:.3g} s after the step, and the response needs {asked.settling_time:.3g} s to rest"


def _strayed(run: Run, outside: NDArray[np.bool_]) -> str:
    share = float(np.mean(outside[run.valid])) if run.valid.any() else 1.0
    if share <= _OUTSIDE:
        return ""
    return f"{100 * share:.1f} % of the samples lie outside the 99.9 % band: look for what disturbed the run"
