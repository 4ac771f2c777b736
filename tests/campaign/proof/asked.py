"""What is asked of the loop: requirements and limits drawn as an engineer would, and the rig file that says so."""

from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
from true_rig import Log, Sensor

from .families import Drawn
from .logs import Style, nice

SETTLING = {  # smallest and largest multiple of the family's base time
    "lag with dead time": (0.6, 4.5),
    "two lags": (0.6, 4.5),
    "resonance": (1.5, 9.0),
    "servo with friction": (2.5, 12.0),
    "integrating level": (4.0, 15.0),
    "two resonances": (2.0, 12.0),
    "sticking valve": (1.5, 7.0),
    "slow wall": (1.5, 8.0),
}


@dataclass(frozen=True)
class Asked:
    """Requirements and limits in base units (s, response unit, command unit, fractions, dB, deg).

    Attributes
    ----------
    bounds : dict
        Requirement name to bound; the names of the rig file.
    test_step : float, response unit
    band : float
        Of the settling time, a fraction of the step.
    command_step : float, command unit
        Of the disturbance.
    lowest, highest, rate : float
        Of the command.
    response_lowest, response_highest, response_rate : float
        Infinite where not limited.
    update_interval, computation_delay : float, s
    """

    bounds: dict[str, float]
    test_step: float
    band: float
    command_step: float
    lowest: float
    highest: float
    rate: float
    response_lowest: float
    response_highest: float
    response_rate: float
    update_interval: float
    computation_delay: float

    @property
    def settling(self) -> float:
        """A time to measure horizons in, s."""
        return self.bounds.get("settling_time", self.bounds.get("rise_time", 0.0) * 3.0)


@dataclass(frozen=True)
class RigFile:
    """What else the rig file says."""

    name: str
    files: list[tuple[str, str]]  # (file, use)
    style: Style
    command_unit: str
    response_unit: str
    operating_point: tuple[float, float] | None = None
    sensor_range: tuple[float, float] | None = None
    extra: list[str] = field(default_factory=list)


def draw_asked(drawn: Drawn, clean: list[Log], sensor: Sensor, generator: np.random.Generator) -> Asked:
    """A requirement set for this rig, loose or tight as it falls, and its limits."""
    settling = float(f"{drawn.base * generator.uniform(*SETTLING[drawn.family]):.3g}")
    bounds = {"settling_time": settling}
    if generator.random() < 0.85:
        bounds["overshoot"] = float(generator.integers(5, 26)) / 100.0
    if generator.random() < 0.8:
        loose = drawn.family in ("servo with friction", "sticking valve")
        bounds["steady_state_error"] = float(generator.integers(3, 7) if loose else generator.integers(1, 4)) / 100.0
    if generator.random() < 0.25:
        bounds["rise_time"] = float(f"{settling * generator.uniform(0.35, 0.7):.3g}")
    for name, low, high in (("gain_margin", 6, 8), ("phase_margin", 35, 50)):
        if generator.random() < 0.3:
            bounds[name] = float(generator.integers(low, high + 1))
    if generator.random() < 0.2:
        bounds["peak_sensitivity"] = float(generator.integers(16, 21)) / 10.0
    step = drawn.swing * generator.uniform(0.4, 1.0) * (1 if generator.random() < 0.7 else -1)
    test_step = float(f"{step:.2g}")
    command_step = float(f"{drawn.amplitude * generator.uniform(0.2, 0.5):.2g}")
    if generator.random() < 0.2:
        bounds["disturbance_peak"] = float(f"{_peak(drawn, command_step) * generator.uniform(0.7, 1.3):.2g}")
    interval = nice(settling / generator.uniform(25.0, 100.0))
    delay = float(f"{interval * generator.uniform(0.1, 0.8):.2g}") if generator.random() < 0.5 else 0.0
    lowest, highest, rate = _response_limits(drawn, clean, test_step, bounds.get("overshoot", 0.3), generator)
    return Asked(
        bounds, test_step, float(generator.choice([0.02, 0.02, 0.05])), command_step, drawn.lowest, drawn.highest,
        float(f"{drawn.rate:.3g}"), lowest, highest, rate, interval, delay,
    )  # fmt: skip


def _peak(drawn: Drawn, command_step: float) -> float:
    """How far a disturbance of the command moves the response when the loop is about as slow as its base time."""
    if drawn.integrating:
        return abs(drawn.gain) * command_step * 3.0 * drawn.base
    ringing = 1.9 if "resonance" in drawn.family else 1.0
    return abs(drawn.gain) * command_step * ringing


def _response_limits(
    drawn: Drawn, clean: list[Log], step: float, overshoot: float, generator: np.random.Generator
) -> tuple[float, float, float]:
    """Lowest, highest and rate, absolute, rounded outwards; infinite where not limited."""
    level = drawn.rig.response_rest
    reach = max(abs(step) * (1.0 + overshoot), *(float(np.max(np.abs(log.reading - level))) for log in clean))
    reach *= generator.uniform(1.25, 2.0)
    fastest = max(float(np.max(np.abs(np.diff(log.fine_response) / np.diff(log.fine_time)))) for log in clean)
    rate = float(f"{fastest * generator.uniform(4.0, 8.0):.2g}") if generator.random() < 0.3 else np.inf
    if generator.random() < 0.25:
        return -np.inf, np.inf, float(rate)
    digits = int(np.ceil(-np.log10(reach))) + 1
    return float(np.round(level - reach, digits)), float(np.round(level + reach, digits)), float(rate)


def write_rig_file(file: Path, asked: Asked, about: RigFile) -> None:
    """The rig file, as the contract has it."""
    u, y, style = about.command_unit, about.response_unit, about.style
    shown = f"{y} " if y != "degC" else "degC "
    lines = ["[rig]", f'name = "{about.name}"', ""]
    if about.operating_point is not None:
        lines += ["[operating_point]", f'command = "{about.operating_point[0]:.8g} {u}"']
        lines += [f'response = "{about.operating_point[1]:.8g} {y}"', ""]
    span = ""
    if about.sensor_range is not None:
        low, high = about.sensor_range
        span = f', range = {{ lowest = "{low:.8g} {y}", highest = "{high:.8g} {y}" }}'
    names = style.columns
    lines += ["[signals]", f'time = {{ source = "{names[0]}", unit = "{style.time_unit}" }}']
    lines += [f'command = {{ source = "{names[1]}", unit = "{u}" }}']
    lines += [f'response = {{ source = "{names[2]}", unit = "{y}"{span} }}', ""]
    for name, use in about.files:
        lines += ["[[runs]]", f'file = "{name}"', f'use = "{use}"', 'excitation = "step"', ""]
    lines += ["[controller]", f'update_interval = "{asked.update_interval:.8g} s"']
    if asked.computation_delay:
        lines.append(f'computation_delay = "{asked.computation_delay:.8g} s"')
    lines += ["", "[requirements]", f'test_step = "{asked.test_step:.8g} {shown.strip()}"']
    lines += [_bound(name, value, asked, u, y) for name, value in asked.bounds.items()]
    lines += ["", "[limits]", f'command = {{ lowest = "{asked.lowest:.8g} {u}", highest = "{asked.highest:.8g} {u}" }}']
    lines.append(f'command_rate = {{ highest = "{_or_not(asked.rate, f"{u}/s")}" }}')
    low, high = _or_not(asked.response_lowest, y), _or_not(asked.response_highest, y)
    lines.append(f'response = {{ lowest = "{low}", highest = "{high}" }}')
    lines.append(f'response_rate = {{ highest = "{_or_not(asked.response_rate, f"{y}/s")}" }}')
    file.write_text("\n".join(lines + about.extra) + "\n", encoding="utf-8")


def _or_not(value: float, unit: str) -> str:
    return f"{value:.8g} {unit}" if np.isfinite(value) else "not limited"


def _bound(name: str, value: float, asked: Asked, command_unit: str, response_unit: str) -> str:
    if name == "overshoot" or name == "steady_state_error":
        return f'{name} = {{ at_most = "{100 * value:.6g} %" }}'
    if name == "settling_time":
        return f'{name} = {{ at_most = "{value:.8g} s", band = "{100 * asked.band:g} %" }}'
    if name == "rise_time":
        return f'{name} = {{ at_most = "{value:.8g} s" }}'
    if name == "gain_margin":
        return f'{name} = {{ at_least = "{value:g} dB" }}'
    if name == "phase_margin":
        return f'{name} = {{ at_least = "{value:g} deg" }}'
    if name == "peak_sensitivity":
        return f"{name} = {{ at_most = {value:g} }}"
    step = f'command_step = "{asked.command_step:.8g} {command_unit}"'
    return f'{name} = {{ at_most = "{value:.8g} {response_unit}", {step} }}'
