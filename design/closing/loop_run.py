"""A held-out run of a closed loop whose gains are known: the whole loop is run from the setpoint, plant and law."""

from dataclasses import replace

import numpy as np
from scipy.signal import lfilter

from ...ident.fitted import Fit, Noise, Plausible
from ...ident.law import Law
from ...ident.plant import Plant
from ...ident.regression import starts_unsettled
from ...ident.replay import integrates
from ...ident.run import FloatArray, Run
from ..discretise import columns_of_law
from ..requirements import ControllerSetting, Limits
from ..sampled.bank import build_bank
from ..sampled.follow import follow
from ..sampled.loop import Clamps
from .prediction import Prediction

_PLANTS = 120
_NORMAL_95 = 1.959964
_LONGEST = 20_000  # controller samples; a longer run is predicted from its logged command
_LIKE = 0.3  # commands further than this from what the gains would have sent, as a share of their changes, are others
_NOISE = 4000  # samples of noise that are sent around the loop
_FEWEST = 5  # samples of rest that tell where a law without integral stood


def predict_loop(run: Run, fit: Fit, limits: Limits, setting: ControllerSetting) -> tuple[Prediction | None, str]:
    """Free run of the loop with the gains in force then, and how the run was predicted, in words.

    The measured response enters nowhere but in where a loop without integral action stood at rest. The band holds the
    plausible plants and the noise as the loop passes it on.

    Returns
    -------
    Prediction or None
        None: the run must be predicted from its logged command; the words say why (empty: it was in open loop).
    """
    if not run.closed_loop:
        return None, ""
    law, goal = run.law, run.setpoint
    if law is None or goal is None or not np.all(np.isfinite(goal)):
        return None, "the loop's gains or its setpoint are not known: predicted from the logged command"
    time = _controller_samples(run, goal, law.update_interval)
    why = _hindered(run, goal, len(time), setting)
    if why:
        return None, f"{why}: predicted from the logged command, not from the setpoint"
    away = _unlike(run, law, goal)
    if away > _LIKE:
        return None, (
            f"the logged command changes otherwise than the stated gains would have it, by {100 * away:.0f} % (check "
            "[runs.current]): predicted from the logged command"
        )
    start = float(goal[0]) if integrates(law) else _rest(run, goal)
    lead = fit.plausible.take(slice(0, _PLANTS)).led_by(fit.plant, fit.operating_command)
    responses = _follow(law, lead, goal[_latest(run.time, time)] - goal[0], _rest_command(run, goal), limits, setting)
    runs = np.array([np.interp(run.time, time, row) for row in responses.T]) + start
    steady = np.all(np.isfinite(runs), axis=1)
    if not steady[0]:
        return None, "with the fitted plant the loop of that run is unstable: predicted from the logged command"
    noise = _noise_around(law, fit.plant, fit.noise, setting)
    half = _NORMAL_95 * np.sqrt(np.std(runs[1:][steady[1:]], axis=0) ** 2 + noise**2)
    found = Prediction(runs[0], runs[0] - half, runs[0] + half, start, runs[1:][steady[1:]])
    return found, "predicted as a free run of the loop with the gains in force then, from its setpoint"


def _hindered(run: Run, goal: FloatArray, samples: int, setting: ControllerSetting) -> str:
    """What keeps the loop from being run, in words; empty where nothing does."""
    if np.ptp(goal) == 0.0:
        return "the setpoint never moves"
    if starts_unsettled(replace(run, command=goal, command_before=None, at_rest=False)):
        return "the run does not begin at rest"
    if setting.response_filter_time > 0.0:
        return "a filter stands before the controller"
    return "the run is too long to run the loop" if samples > _LONGEST else ""


def _controller_samples(run: Run, goal: FloatArray, interval: float) -> FloatArray:
    """Times of the controller's samples: the log does not name them, but the setpoint moves at one."""
    moved = np.flatnonzero(np.diff(goal) != 0.0) + 1
    first = float(run.time[moved[0]]) % interval if len(moved) else 0.0
    first = 0.0 if interval - first < 1e-6 * interval else first
    count = int((run.time[-1] - run.time[0] - first) / interval + 1e-6) + 1
    return np.asarray(run.time[0] + first + interval * np.arange(count))


def _latest(logged: FloatArray, time: FloatArray) -> np.ndarray:
    """Index of the last logged sample at each time."""
    slack = 1e-6 * float(np.median(np.diff(logged)))
    return np.maximum(np.searchsorted(logged, time + slack, side="right") - 1, 0)


def _rest(run: Run, goal: FloatArray) -> float:
    still = run.response[: _first_move(goal)]
    still = still[np.isfinite(still)]
    return float(np.mean(still)) if len(still) >= _FEWEST else float(goal[0])


def _rest_command(run: Run, goal: FloatArray) -> float:
    return float(np.mean(run.command[: _first_move(goal)]))


def _first_move(goal: FloatArray) -> int:
    return int(np.flatnonzero(goal != goal[0])[0])


def _unlike(run: Run, law: Law, goal: FloatArray) -> float:
    """How far each logged command lies from what the law makes of the logged past, as a share of what it changes by.

    Only where each sample of the log is one of the controller's; 0 where that can't be told. Samples at the highest and
    lowest command don't count: there the law may have been clamped.
    """
    interval = float(np.median(np.diff(run.time)))
    if abs(law.update_interval - interval) > 1e-3 * interval or not run.valid.all() or run.command_late > 0.0:
        return 0.0
    start = float(goal[0]) if integrates(law) else _rest(run, goal)
    wanted = lfilter(law.setpoint, [1.0], goal - goal[0]) - lfilter(law.response, [1.0], run.response - start)
    missed = lfilter(law.command, [1.0], run.command - _rest_command(run, goal)) - wanted
    inside = (run.command > run.command.min()) & (run.command < run.command.max())
    inside[: len(law.command)] = False
    size = float(np.mean(wanted[inside] ** 2)) if inside.any() else 0.0
    return float(np.sqrt(np.mean(missed[inside] ** 2) / size)) if size > 0.0 else 0.0


def _follow(
    law: Law, plausible: Plausible, goal: FloatArray, rest: float, limits: Limits, setting: ControllerSetting
) -> FloatArray:
    """(n, p) responses at the controller's samples, from rest, in deviations from there."""
    count = len(plausible.plants)
    bank = build_bank(
        plausible.plants,
        law.update_interval,
        computation_delay=setting.computation_delay,
        filter_time=0.0,
        points=1,
        stiction=plausible.stiction,
        valves=plausible.valves,
        curves=plausible.curves,
    )
    low = -np.inf if limits.command_lowest is None else min(limits.command_lowest - rest, 0.0)
    high = np.inf if limits.command_highest is None else max(limits.command_highest - rest, 0.0)
    change = np.inf if limits.command_rate is None else limits.command_rate * law.update_interval
    clamps = Clamps(np.full(count, low), np.full(count, high), change)
    columns = columns_of_law(law).take(np.zeros(count, dtype=int))
    with np.errstate(over="ignore", invalid="ignore"):
        response, _ = follow(bank, columns, goal, clamps)
    return response


def _noise_around(law: Law, plant: Plant, noise: Noise, setting: ControllerSetting) -> float:
    """Standard deviation, response unit, of noise that the loop acts upon: it is logged with what it stirs up."""
    if noise.std == 0.0:
        return 0.0
    white = np.random.default_rng(0).standard_normal(_NOISE)
    logged = lfilter([1.0, noise.c], [1.0, -noise.rho], white)
    every = max(round(law.update_interval / noise.interval), 1) if noise.interval > 0.0 else 1
    seen = logged[::every] * (noise.std / float(np.std(logged)))
    around = replace(law, setpoint=tuple(-c for c in law.response))
    one = Plausible((plant,), np.zeros(1), np.zeros(1))
    stirred = _follow(around, one, seen, 0.0, Limits(), setting)[:, 0]
    total = float(np.std(seen + stirred))
    return total if np.isfinite(total) else noise.std
