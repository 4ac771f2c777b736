"""The predicted response to the test step, with the band of the plausible plants."""

import numpy as np

from ..ident.fitted import Plausible
from ..ident.plant import Plant
from ..ident.run import FloatArray
from .continuous import half_held
from .designed import Trajectory
from .discretise import columns_of, law_columns
from .gains import Gains
from .sampled.around import run_around
from .sampled.bank import build_bank
from .sampled.loop import Clamps
from .situation import Situation
from .steady import rest_at

_BAND = 200  # plants that make the band
_SHOWN = 600  # samples kept at most


def trajectory(gains: Gains, nominal: Plant, plausible: Plausible, situation: Situation, horizon: float) -> Trajectory:
    """Predict the test step on the fitted plant and on some plausible ones, absolute readings.

    Parameters
    ----------
    horizon : float, s
        How much is shown.
    """
    setting = situation.setting
    count = len(plausible.plants)
    some = plausible.take(np.linspace(0, count - 1, min(count, _BAND)).astype(int).tolist())
    led = some.led_by(nominal, situation.operating_command)
    bank = build_bank(
        led.plants,
        setting.update_interval,
        computation_delay=half_held(setting, setting.update_interval),
        filter_time=setting.response_filter_time,
        points=1,
        stiction=led.stiction,
        valves=led.valves,
        curves=led.curves,
        predict=setting.continuous,
    )
    which = np.arange(bank.lag.size)
    law = law_columns(columns_of([gains]), bank.interval).take(np.zeros(which.size, dtype=int))
    offset = situation.operating_command - led.operating_command
    rest = rest_at(bank, which, law, np.full(which.size, situation.start), offset)
    clamp = situation.clamp
    low = (-np.inf if clamp.lowest is None else clamp.lowest) - rest.command
    high = (np.inf if clamp.highest is None else clamp.highest) - rest.command
    change = np.inf if clamp.rate is None else clamp.rate * bank.interval
    samples = int(np.clip(np.ceil(horizon / bank.interval), 20, 20_000))
    step = np.full(which.size, situation.step)
    still = np.zeros(which.size)
    history = run_around(
        bank, which, law, setpoint=step, disturbance=still, clamps=Clamps(low, high, change), samples=samples
    )
    response = np.vstack([still, history.response[:-1]]) + rest.response + situation.operating_response
    command = history.command + rest.command + situation.operating_command
    goal = situation.operating_response + situation.start + situation.step
    return _thinned(bank.interval, samples, goal, response, command)


def _thinned(interval: float, samples: int, goal: float, response: FloatArray, command: FloatArray) -> Trajectory:
    rows = np.unique(np.linspace(0, samples - 1, min(samples, _SHOWN)).astype(int))
    response_low, response_high = np.quantile(response[rows], [0.025, 0.975], axis=1)
    command_low, command_high = np.quantile(command[rows], [0.025, 0.975], axis=1)
    return Trajectory(
        rows * interval,
        np.full(rows.size, goal),
        response[rows, 0],
        response_low,
        response_high,
        command[rows, 0],
        command_low,
        command_high,
    )
