"""Requirements, limits and controller settings into the units of the signals and into seconds."""

import math

from ...design.requirements import ControllerSetting, Limits, Requirement, RequirementName, Requirements
from .messages import Problems
from .quantities import Quantities, display, is_percent
from .runs import require_order
from .schema import Controller, LevelLimit, LimitsPart, RequirementsPart

IN_TIME: tuple[RequirementName, ...] = (
    "overshoot",
    "settling_time",
    "rise_time",
    "steady_state_error",
    "ramp_error",
    "disturbance_peak",
    "disturbance_recovery",
)


class Wishes:
    """Builds the values of one rig file.

    Parameters
    ----------
    problems : Problems
    command_unit, response_unit : str
    """

    def __init__(self, problems: Problems, command_unit: str, response_unit: str) -> None:
        self._problems = problems
        self._quantities = Quantities(problems)
        self._command = command_unit
        self._response = response_unit

    def setting(self, part: Controller) -> ControllerSetting:
        """[controller] without the gains now in force, which belong to the runs."""
        numbers, key = self._quantities, "controller"
        interval, delay = part.update_interval, part.computation_delay
        late = numbers.difference(f"{key}.computation_delay", delay, "s", least=0.0)
        return ControllerSetting(
            update_interval=0.0 if interval is None else numbers.positive(f"{key}.update_interval", interval, "s"),
            computation_delay=0.0 if interval is None else late,
            structures=tuple(dict.fromkeys(part.structures)) if part.structures is not None else None,
            response_filter_time=numbers.difference(
                f"{key}.response_filter_time", part.response_filter_time, "s", least=0.0
            ),
            continuous=interval is None,
        )

    def limits(self, part: LimitsPart) -> Limits:
        """[limits]"""
        command = self._levels("limits.command", part.command, self._command)
        response = self._levels("limits.response", part.response, self._response)
        command_rate = response_rate = None
        if part.command_rate is not None:
            command_rate = self._quantities.rate_limit(
                "limits.command_rate.highest", part.command_rate.highest, f"({self._command})/s"
            )
        if part.response_rate is not None:
            response_rate = self._quantities.rate_limit(
                "limits.response_rate.highest", part.response_rate.highest, f"({self._response})/s"
            )
        return Limits(*command, command_rate, *response, response_rate)

    def _levels(self, key: str, part: LevelLimit, unit: str) -> tuple[float | None, float | None]:
        numbers = self._quantities
        lowest = None if part.lowest is None else numbers.limit(f"{key}.lowest", part.lowest, unit, -math.inf)
        highest = None if part.highest is None else numbers.limit(f"{key}.highest", part.highest, unit, math.inf)
        require_order(key, lowest, highest, self._problems)
        return lowest, highest

    def requirements(self, part: RequirementsPart, limits: Limits) -> Requirements:
        """[requirements]"""
        numbers, key = self._quantities, "requirements"
        step = start = None
        if part.test_step is not None:
            step = numbers.difference(f"{key}.test_step", part.test_step, self._response)
        if step == 0.0:
            self._problems.add(
                f"{key}.test_step",
                "a step of zero tests nothing",
                f'"{part.test_step}"',
                "a step that the rig is to follow",
            )
        if part.test_step_from is not None:
            start = numbers.reading(f"{key}.test_step_from", part.test_step_from, self._response)
        self._require_step(part, limits)
        confidence = numbers.fraction(f"{key}.confidence", part.confidence, most=1.0)
        if confidence <= 0.0:
            self._problems.add(f"{key}.confidence", "must be above zero", f'"{part.confidence}"', 'such as "95 %"')
        return Requirements(self._items(part, step), step, start, part.both_directions, confidence)

    def _require_step(self, part: RequirementsPart, limits: Limits) -> None:
        if part.test_step is not None:
            return
        stated = [name for name in IN_TIME if getattr(part, name) is not None]
        bounds = [name for name, value in vars(limits).items() if value is not None and math.isfinite(value)]
        if stated or bounds:
            because = f"requirements.{stated[0]}" if stated else f"limits ({bounds[0].replace('_', ' ')})"
            self._problems.add(
                "requirements.test_step",
                f"this key is missing; {because} is judged on a step",
                expected=f'a setpoint step, sign included, such as "20 {self._response}"',
            )

    def _items(self, part: RequirementsPart, step: float | None) -> tuple[Requirement, ...]:
        items: list[Requirement] = []
        if part.overshoot is not None:
            limit = self._quantities.fraction("requirements.overshoot.at_most", part.overshoot.at_most)
            items.append(Requirement("overshoot", limit, "at_most", "%", 100.0))
        if part.settling_time is not None:
            band = self._quantities.fraction("requirements.settling_time.band", part.settling_time.band, most=0.5)
            if band == 0.0:
                self._problems.add(
                    "requirements.settling_time.band",
                    "must be above zero",
                    f'"{part.settling_time.band}"',
                    'such as "2 %"',
                )
            items.append(self._bound("settling_time", part.settling_time.at_most, "s", band=band))
        if part.rise_time is not None:
            items.append(self._bound("rise_time", part.rise_time.at_most, "s"))
        if part.steady_state_error is not None:
            items.append(self._steady_error(part.steady_state_error.at_most, step))
        return (*items, *self._followed(part), *self._loop(part))

    def _bound(
        self,
        name: RequirementName,
        text: str,
        unit: str,
        *,
        band: float | None = None,
        command_step: float | None = None,
        ramp: float | None = None,
    ) -> Requirement:
        limit = self._quantities.positive(f"requirements.{name}.at_most", text, unit)
        shown = display(text, unit) if math.isfinite(limit) else (unit, 1.0)
        return Requirement(name, limit, "at_most", *shown, band=band, command_step=command_step, ramp=ramp)

    def _steady_error(self, text: str, step: float | None) -> Requirement:
        key = "requirements.steady_state_error.at_most"
        if not self._problems.attempt(key, lambda: is_percent(text), True):
            return self._bound("steady_state_error", text, self._response)
        size = abs(step) if step else math.nan
        share = self._quantities.fraction(key, text)
        return Requirement("steady_state_error", share * size, "at_most", "%", 100.0 / size)

    def _followed(self, part: RequirementsPart) -> list[Requirement]:
        items: list[Requirement] = []
        numbers, key = self._quantities, "requirements"
        if part.ramp_error is not None:
            ramp = numbers.difference(f"{key}.ramp_error.ramp", part.ramp_error.ramp, f"({self._response})/s")
            items.append(self._bound("ramp_error", part.ramp_error.at_most, self._response, ramp=ramp))
        if part.disturbance_peak is not None:
            peak = part.disturbance_peak
            step = numbers.difference(f"{key}.disturbance_peak.command_step", peak.command_step, self._command)
            items.append(self._bound("disturbance_peak", peak.at_most, self._response, command_step=step))
        if part.disturbance_recovery is not None:
            recovery = part.disturbance_recovery
            step = numbers.difference(f"{key}.disturbance_recovery.command_step", recovery.command_step, self._command)
            band = numbers.positive(f"{key}.disturbance_recovery.band", recovery.band, self._response)
            items.append(self._bound("disturbance_recovery", recovery.at_most, "s", band=band, command_step=step))
        if part.command_noise is not None:
            items.append(self._bound("command_noise", part.command_noise.at_most, self._command))
        return items

    def _loop(self, part: RequirementsPart) -> list[Requirement]:
        items: list[Requirement] = []
        numbers, key = self._quantities, "requirements"
        if part.damping_ratio is not None:
            self._between(f"{key}.damping_ratio.at_least", part.damping_ratio.at_least, 0.0, 1.0)
            items.append(Requirement("damping_ratio", part.damping_ratio.at_least, "at_least"))
        if part.gain_margin is not None:
            limit = numbers.positive(f"{key}.gain_margin.at_least", part.gain_margin.at_least, "dB")
            items.append(Requirement("gain_margin", limit, "at_least", "dB"))
        if part.phase_margin is not None:
            limit = numbers.positive(f"{key}.phase_margin.at_least", part.phase_margin.at_least, "deg")
            items.append(Requirement("phase_margin", limit, "at_least", "deg"))
        if part.peak_sensitivity is not None:
            self._between(f"{key}.peak_sensitivity.at_most", part.peak_sensitivity.at_most, 1.0, math.inf)
            items.append(Requirement("peak_sensitivity", part.peak_sensitivity.at_most, "at_most"))
        return items

    def _between(self, key: str, value: float, low: float, high: float) -> None:
        if not low < value <= high:
            self._problems.add(
                key,
                "out of range",
                f"{value:g}",
                f"above {low:g}" + (f", at most {high:g}" if math.isfinite(high) else ""),
            )
