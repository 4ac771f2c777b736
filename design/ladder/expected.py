"""What each rung's setpoint step should look like on the fitted plant, and within which band on the plausible ones."""

from dataclasses import replace

import numpy as np

from ...ident.fitted import Plausible
from ...ident.run import FloatArray
from .. import step_metrics
from ..continuous import half_held
from ..discretise import columns_of, law_columns
from ..gains import Gains
from ..horizon import first_horizon
from ..sampled.around import run_around
from ..sampled.bank import Bank, build_bank
from ..sampled.loop import Clamps
from ..situation import Situation
from ..steady import rest_at
from .rung import Band, Expected, Spread

_SAMPLES = 200  # of a run, at most about: a slow rung is run at a longer interval of the same total delay
_ROTATION = 0.35  # rad a sample, at most, of a lightly damped plant pole
_SHOWN = 160
_NORMAL_999 = 3.2905  # standard deviations that hold 99.9 %: exact law
_GROWS = 6
_PATIENCE = 2.4  # settling times of a rung in which one of two thirds of the gain is at rest, mostly


def expected_of(
    gains: Gains, plausible: Plausible, situation: Situation, noise_std: float, share: float, horizon: float
) -> tuple[Expected, float]:
    """The rung's step of a share of the test step, and the horizon in s that the next slower rung may begin with.

    Parameters
    ----------
    plausible : Plausible
        The fitted plant first.
    horizon : float, s
        Where to begin; it doubles until the fitted plant is at rest, and shrinks where it rests early.
    """
    smaller = replace(situation, requirements=replace(situation.requirements, test_step=share * situation.step))
    for _ in range(_GROWS):
        run = _Run(gains, plausible, smaller, horizon)
        settled = float(run.settled[0])
        if 0.0 < settled < 0.25 * horizon:
            horizon = _PATIENCE * settled
        elif settled <= 0.8 * horizon:
            return run.expected(noise_std), _PATIENCE * settled
        else:
            horizon *= 2.0
    return run.expected(noise_std), horizon


def start_horizon(situation: Situation, plausible: Plausible) -> float:
    """Two and a half of the slowest time asked for, or the plant's own pace, s."""
    return first_horizon(plausible.plants[0], situation, 2.5)


class _Run:
    """One rung on some plants."""

    def __init__(self, gains: Gains, plausible: Plausible, situation: Situation, horizon: float) -> None:
        self.situation = situation
        self.bank = bank = _bank(plausible, situation, horizon)
        count = len(plausible.plants)
        which = np.arange(count)
        law = law_columns(columns_of([gains]), bank.interval).take(np.zeros(count, dtype=int))
        offset = situation.operating_command - plausible.operating_command
        start = np.full(count, situation.start)
        self.before = rest_at(bank, which, law, start, offset)
        after = rest_at(bank, which, law, start + situation.step, offset)
        low, high, change = _bounds(situation, bank.interval)
        self.history = run_around(
            bank,
            which,
            law,
            setpoint=np.full(count, situation.step),
            disturbance=np.zeros(count),
            clamps=Clamps(low - self.before.command, high - self.before.command, change),
            samples=max(int(np.ceil(horizon / bank.interval)), 20),
        )
        self.spacing = bank.interval / bank.points
        held = np.zeros(count, dtype=bool) if bank.drives is None else bank.drives.friction > 0.0
        smooth, last = after.response - self.before.response, self.history.response[-1]
        self.final = np.where(held & (last != 0.0), last, smooth)

    @property
    def settled(self) -> FloatArray:
        """(p,) settling times into 2 %, s."""
        return step_metrics.settling_time(self.history.response, self.final, 0.02, self.spacing)

    def expected(self, noise_std: float) -> Expected:
        situation, history = self.situation, self.history
        level = situation.operating_response + self.before.response
        way = np.sign(situation.step)
        rise = step_metrics.rise_time(history.response, self.final, self.spacing)
        peak = level + way * step_metrics.peak(way * history.response)
        time = self.spacing * history.response.shape[0]
        begins = situation.operating_response + situation.start
        return Expected(
            begins,
            begins + situation.step,
            _spread(peak),
            _spread(level + self.final),
            _spread(step_metrics.overshoot(history.response, self.final)),
            _spread(rise),
            _spread(self.settled),
            _spread(self._command()),
            float(rise[0]) if np.isfinite(rise[0]) else 0.2 * time,
            self._band(level, noise_std),
        )

    def _command(self) -> FloatArray:
        sent = self.history.command
        farthest = np.abs(sent).argmax(axis=0)
        return np.asarray(
            self.situation.operating_command + self.before.command + sent[farthest, np.arange(sent.shape[1])]
        )

    def _band(self, level: FloatArray, noise_std: float) -> Band:
        response = level + np.vstack([np.zeros(level.size), self.history.response])
        rows = np.unique(np.linspace(0, response.shape[0] - 1, min(response.shape[0], _SHOWN)).astype(int))
        shown = response[rows]
        middle = shown.mean(axis=1)
        half = _NORMAL_999 * np.sqrt(shown.std(axis=1) ** 2 + noise_std**2)
        low = np.minimum(middle - half, shown.min(axis=1) - _NORMAL_999 * noise_std)
        high = np.maximum(middle + half, shown.max(axis=1) + _NORMAL_999 * noise_std)
        return Band(self.spacing * rows, shown[:, 0], low, high)


def _bounds(situation: Situation, interval: float) -> tuple[float, float, float]:
    clamp = situation.clamp
    low = -np.inf if clamp.lowest is None else clamp.lowest
    high = np.inf if clamp.highest is None else clamp.highest
    return low, high, np.inf if clamp.rate is None else clamp.rate * interval


def _bank(plausible: Plausible, situation: Situation, horizon: float) -> Bank:
    """At the update interval, or at a longer one of the same total delay where the run would take too many samples."""
    setting = situation.setting
    interval = setting.update_interval
    if horizon > 1.2 * _SAMPLES * interval:
        least = min(plant.dead_time for plant in plausible.plants) + setting.computation_delay
        longest = interval + 2.0 * least + 0.001 * horizon
        interval = max(interval, min(horizon / _SAMPLES, longest, _ROTATION / _swing(plausible)))
    return build_bank(
        plausible.plants,
        interval,
        computation_delay=half_held(setting, interval),
        filter_time=setting.response_filter_time,
        points=2 if not np.any(plausible.stiction > 0.0) else 1,
        stiction=plausible.stiction,
        valves=plausible.valves,
        curves=plausible.curves,
    )


def _swing(plausible: Plausible) -> float:
    """Natural frequency of the fitted plant's lightly damped poles, rad/s; next to nothing where there are none."""
    poles = plausible.plants[0].poles
    light = poles[(poles.imag > 0.0) & (np.abs(poles.real) < 0.4 * np.abs(poles))]
    return float(np.abs(light).max()) if light.size else 1e-300


def _spread(values: FloatArray) -> Spread:
    order = np.sort(np.where(np.isnan(values), np.inf, values))
    low, high = order[int(0.025 * (order.size - 1))], order[int(np.ceil(0.975 * (order.size - 1)))]
    return Spread(_known(values[0]), _known(low), _known(high))


def _known(value: float) -> float | None:
    return float(value) if np.isfinite(value) else None
