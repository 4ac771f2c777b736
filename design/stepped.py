"""What is read off simulated steps: times, overshoot, errors and extremes of many columns at once."""

from collections.abc import Callable
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from ..ident.run import FloatArray
from . import step_metrics
from .discretise import LawColumns
from .sampled.around import held_by_friction, held_by_valve, run_around
from .sampled.bank import IndexArray
from .sampled.loop import Clamps, History
from .situation import DISTURBED, STEP
from .steady import Rest, rest_at, stiction_error

if TYPE_CHECKING:
    from .values import Bench

Watch = Callable[[IndexArray, Rest, History], None]

_INNER = 0.8  # of the settling band: a narrower one, which a cautious design enters ...
_LATER = 1.12  # ... at most so much later; a smooth approach does, a swing that just stays inside does not


class Stepped:
    """Everything that is read off simulated steps; unstable columns are not run and get `never`."""

    def __init__(
        self, bench: "Bench", which: IndexArray, law: LawColumns, stable: NDArray[np.bool_], watch: Watch | None
    ) -> None:
        self.bench, self.situation, self.watch = bench, bench.situation, watch
        self.count, self.chosen = which.size, np.flatnonzero(stable)
        self.which, self.law = which[self.chosen], law.take(self.chosen)
        self.offset = self.situation.operating_command - bench.plausible.operating_command[self.which]
        self.values: dict[str, FloatArray] = {}
        self.graded: dict[str, FloatArray] = {}
        self.extremes: dict[str, FloatArray] = {}
        self.clamped, self.settled = np.zeros(self.count), np.full(self.count, np.nan)
        if self.situation.step != 0.0:
            self._both_steps()
        self._disturbances()

    def _both_steps(self) -> None:
        step = self.situation.step
        if not (self.situation.asks(STEP) or self._limited_anywhere()):
            return
        self._step(step)
        if self.situation.requirements.both_directions:
            self._step(-step)

    def _limited_anywhere(self) -> bool:
        if self.bench.graded:
            return False
        limits = self.situation.limits
        bounds = (limits.response_lowest, limits.response_highest, limits.response_rate)
        others = (limits.command_lowest, limits.command_highest, limits.command_rate)
        return any(bound is not None for bound in bounds + others)

    def _step(self, step: float) -> None:
        here = np.full(self.chosen.size, self.situation.start)
        before = rest_at(self.bench.running, self.which, self.law, here, self.offset)
        after = rest_at(self.bench.running, self.which, self.law, here + step, self.offset)
        history = self._run(np.full(here.size, step), np.zeros(here.size), before.command)
        if self.watch is not None and step == self.situation.step:
            self.watch(self.chosen, before, history)
        self._read_step(history, after.response - before.response, here + step - before.response)
        self._read_extremes(history, before.response, before.command)
        if history.limited is not None:
            time = history.limited.sum(axis=0) * self.bench.running.interval
            self.clamped[self.chosen] = np.maximum(self.clamped[self.chosen], time)

    def _run(self, setpoint: FloatArray, disturbance: FloatArray, command: FloatArray) -> History:
        clamp = self.situation.clamp
        low = -np.inf if clamp.lowest is None else clamp.lowest
        high = np.inf if clamp.highest is None else clamp.highest
        change = np.inf if clamp.rate is None else clamp.rate * self.bench.running.interval
        rate = self.situation.limits.response_rate
        return run_around(
            self.bench.running,
            self.which,
            self.law,
            setpoint=setpoint,
            disturbance=disturbance,
            clamps=Clamps(low - command, high - command, change),
            samples=self.bench.samples,
            rates=_bounded(rate) and not self.bench.graded,
        )

    def _read_step(self, history: History, final: FloatArray, goal: FloatArray) -> None:
        """`goal`: the new setpoint as seen from the response's start."""
        bank, moving = self.bench.running, step_metrics.still_moving(history.limited, self.chosen.size)
        held, smooth_final = held_by_friction(bank, self.which), final
        if held.any():
            final = np.where(held, history.response[-1], final)
            moving = moving | (held & step_metrics.wanders(history.response, final))
        if bank.curves is not None:  # without integral action it comes to rest where the curve lets it
            short = (bank.curves[0, self.which] != 0.0) & (np.abs(goal - final) > 1e-6 * np.abs(goal))
            final = np.where(short, history.response[-1], final)
            moving = moving | (short & step_metrics.wanders(history.response, final))
        stuck = held_by_valve(bank, self.which)
        if stuck.any():  # it may hunt for ever: the middle of the last tenth is as steady as it gets
            middle = step_metrics.late(history.response, 0.1).mean(axis=0)
            final = np.where(stuck & (np.abs(middle) > 0.1 * np.abs(goal)), middle, final)
        spacing = bank.interval / bank.points
        settle = self.situation.requirements.find("settling_time")
        with np.errstate(invalid="ignore"):  # a plant that friction never lets go: nothing over nothing
            share = history.response / final
        away = share - 1.0
        np.abs(away, out=away)
        usual = step_metrics.last_entry(away, 0.02, spacing, start=1.0)
        usual = np.where(moving, np.inf, usual)
        whole = spacing * history.response.shape[0]
        self._keep_settled(np.where(stuck, np.minimum(usual, whole / 5.0), usual))
        if settle is not None:
            band = settle.band or 0.02
            time = usual if band == 0.02 else step_metrics.last_entry(away, band, spacing, start=1.0)
            if self.bench.cautious:
                inner = step_metrics.last_entry(away, _INNER * band, spacing, start=1.0)
                time = np.maximum(time, inner / _LATER)
            time = np.where(stuck & (time > 0.8 * whole), np.inf, time)
            self._keep("settling_time", np.where(moving, np.inf, time))
            if self.bench.graded:
                late = step_metrics.largest_from(away, settle.limit, spacing) / band - 1.0
                self._grade("settling_time", np.where(moving, np.maximum(late, 1.0), late))
        if self.situation.asks(("overshoot",)):
            self._keep("overshoot", np.maximum(step_metrics.peak(share) - 1.0, 0.0))
        if self.situation.asks(("rise_time",)):
            self._keep("rise_time", step_metrics.rise_of_share(share, spacing))
            rise = self.situation.requirements.find("rise_time")
            if self.bench.graded and rise is not None:
                self._grade("rise_time", step_metrics.short_of_rise(share, rise.limit, spacing))
        if self.situation.asks(("steady_state_error",)):
            tail = history.response[-max(history.response.shape[0] // 5, 1) :]
            wandering = np.abs(goal - tail).max(axis=0) if tail.size else np.abs(goal)
            remaining = np.where(np.isfinite(usual) & ~stuck, np.abs(goal - final), wandering)
            stiction = stiction_error(bank, self.which, self.law, self.bench.plausible.stiction[self.which])
            anywhere = np.abs(goal - smooth_final) + stiction
            self._keep("steady_state_error", np.where(held, np.maximum(remaining, anywhere), remaining + stiction))

    def _keep_settled(self, time: FloatArray) -> None:
        known = self.settled[self.chosen]
        self.settled[self.chosen] = np.where(np.isnan(known), time, np.maximum(known, time))

    def _keep(self, name: str, value: FloatArray) -> None:
        """Keep the worse of what is known and what is new; unstable columns never get there."""
        held = self.values.setdefault(name, np.where(np.isin(np.arange(self.count), self.chosen), -np.inf, np.inf))
        held[self.chosen] = np.maximum(held[self.chosen], np.where(np.isnan(value), np.inf, value))

    def _grade(self, name: str, value: FloatArray) -> None:
        held = self.graded.setdefault(name, np.where(np.isin(np.arange(self.count), self.chosen), -np.inf, np.inf))
        held[self.chosen] = np.maximum(held[self.chosen], np.where(np.isnan(value), np.inf, value))

    def _read_extremes(self, history: History, response: FloatArray, command: FloatArray) -> None:
        if self.bench.graded:
            return
        level = self.situation.operating_response + response
        sent = self.situation.operating_command + command
        steps = np.abs(np.diff(history.command, axis=0, prepend=0.0)).max(axis=0) / self.bench.running.interval
        if _bounded(self.situation.limits.response_highest):
            self._widen("response highest", level + step_metrics.peak(history.response))
        if _bounded(self.situation.limits.response_lowest):
            self._widen("response lowest", level - step_metrics.peak(-history.response), lowest=True)
        self._widen("command highest", sent + np.maximum(history.command.max(axis=0), 0.0))
        self._widen("command lowest", sent + np.minimum(history.command.min(axis=0), 0.0), lowest=True)
        self._widen("command rate", steps)
        if history.rate is not None:
            self._widen("response rate", history.rate)

    def _widen(self, name: str, value: FloatArray, *, lowest: bool = False) -> None:
        held = self.extremes.setdefault(name, np.full(self.count, np.nan))
        known = held[self.chosen]
        further = np.fmin(known, value) if lowest else np.fmax(known, value)
        held[self.chosen] = further

    def _disturbances(self) -> None:
        for size in {item.command_step for item in self.situation.items if item.name in DISTURBED}:
            here = np.full(self.chosen.size, self.situation.start)
            before = rest_at(self.bench.running, self.which, self.law, here, self.offset)
            history = self._run(np.zeros(here.size), np.full(here.size, size or 0.0), before.command)
            self._read_disturbance(history, size)
            self._read_extremes(history, before.response, before.command)

    def _read_disturbance(self, history: History, size: float | None) -> None:
        spacing = self.bench.running.interval / self.bench.running.points
        away = np.abs(history.response)
        for item in self.situation.items:
            if item.command_step != size or item.name not in DISTURBED:
                continue
            if item.name == "disturbance_peak":
                self._keep(item.name, step_metrics.peak(away))
            else:
                band = item.band or 0.0
                self._keep(item.name, step_metrics.last_entry(away, band, spacing))
                if self.bench.graded and band > 0.0:
                    self._grade(item.name, step_metrics.largest_from(away, item.limit, spacing) / band - 1.0)


def _bounded(limit: float | None) -> bool:
    return limit is not None and bool(np.isfinite(limit))
