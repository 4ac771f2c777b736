"""Tests as an engineer runs them on the rig, logged and written as CSV."""

from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from true_rig import Log, TrueRig, open_loop
from true_rig.rough_stages import Disturbed, waves
from true_rig.sensor import Reading, Sensor

from .families import Drawn, log_uniform

FloatArray = NDArray[np.float64]
FIT = ((1.0, -1.0, 0.0), (1.0, 0.0, -1.0, 0.0), (1.0, -0.6, 0.5, -1.0, 0.0), (-1.0, 0.5, 1.0, 0.0))
HELD_OUT = ((-0.8, 0.7, 0.0), (0.6, -0.9, 0.3, 0.0), (-0.7, 0.0, 0.9, 0.0))
PULSES = ((1.0, 0.0, -1.0, 0.0), (1.0, -1.0, 0.0, -0.8, 0.8, 0.0), (-1.0, 0.0, 1.0, 0.0, 0.7, -0.7, 0.0))
HELD_OUT_PULSES = ((-0.8, 0.8, 0.0), (0.7, 0.0, -0.8, 0.0), (0.9, -0.9, 0.0, 0.0))


@dataclass(frozen=True, eq=False)
class Record:
    """One record as logged."""

    time: FloatArray
    command: FloatArray
    reading: FloatArray


@dataclass(frozen=True)
class Style:
    """How this rig's logger writes."""

    separator: str
    decimal: str
    time_unit: str
    columns: tuple[str, str, str]
    preamble: tuple[str, ...]
    interval: float


def nice(value: float) -> float:
    """The nearest of 1, 2, 2.5, 4, 5 times a power of ten, as people set their clocks."""
    power = 10.0 ** np.floor(np.log10(value))
    steps = np.array([1.0, 2.0, 2.5, 4.0, 5.0, 10.0])
    return float(f"{power * steps[np.argmin(np.abs(np.log(steps * power / value)))]:.3g}")


def draw_style(drawn: Drawn, generator: np.random.Generator) -> Style:
    """Separator, decimal sign, units of time and names of this rig's logs, and its sample interval."""
    separator, decimal = [(",", "."), (";", "."), (";", ","), ("\t", ".")][generator.integers(4)]
    resolve = min([drawn.base] + [t for t in drawn.times if t > 0.0 and not drawn.family.endswith("resonance")])
    if "resonance" in drawn.family:
        resolve = drawn.times[0] * 4.0
    longest = 7.0 * drawn.dwell  # of one record
    interval = nice(max(resolve / log_uniform(generator, 40.0, 100.0), longest / 8000.0))
    time_unit = "ms" if interval < 0.02 and generator.random() < 0.5 else "s"
    columns = [("t", "drive", "meas"), ("time", "command", "response"), ("Time", "u", "y")][generator.integers(3)]
    preamble = ("Logger 3", "channels: 3") if generator.random() < 0.2 else ()
    return Style(separator, decimal, time_unit, columns, preamble, interval)


def profile(drawn: Drawn, levels: tuple[float, ...], generator: np.random.Generator) -> tuple[list, float]:
    """[(time, command)] of a test and its whole duration, s: rest, the levels, and the last one a while longer."""
    rest, t = drawn.dwell * generator.uniform(0.4, 0.8), 0.0
    t += rest
    changes = []
    lengths = drawn.dwell * generator.uniform(0.85, 1.25, len(levels))
    if drawn.integrating:  # a pulse must give back what it took
        lengths[:] = drawn.dwell
    for level, length in zip(levels, lengths, strict=True):
        changes.append((t, drawn.rig.command_rest + level * drawn.amplitude))
        t += length
    return changes, t


def record(rig: TrueRig, changes: list, duration: float, interval: float, drift: float, seed: int) -> Log:
    """A noise-free log; `drift` is the rms of a slow wandering of the response, response unit."""
    generator = np.random.default_rng(seed)
    if drift > 0.0:
        wander = Disturbed(waves(generator, drift, (0.9 * duration, 0.4 * duration)))
        rig = replace(rig, stages=(*rig.stages, wander))
    held = [(interval * round(t / interval), u) for t, u in changes]
    return open_loop(rig, held, duration, interval, generator)


def sense(log: Log, sensor: Sensor, generator: np.random.Generator) -> Record:
    """The same log through a noisy sensor."""
    reading = Reading(sensor, generator)
    values = [reading.at(t, y) for t, y in zip(log.time.tolist(), log.reading.tolist(), strict=True)]
    return Record(log.time, log.command, np.array(values))


def draw_sensor(drawn: Drawn, clean: list[Log], interval: float, generator: np.random.Generator) -> Sensor:
    """Noise 25 to 50 dB below the response, white or coloured, and a converter of 12 to 16 bits."""
    deviation = float(np.std(np.concatenate([log.reading for log in clean])))
    noise = deviation / 10.0 ** (generator.uniform(25.0, 50.0) / 20.0)
    memory = interval * log_uniform(generator, 0.5, 10.0) if generator.random() < 0.5 else 0.0
    span = 2.5 * max(float(np.ptp(log.reading)) for log in clean)
    step = span / 2.0 ** int(generator.integers(12, 17))
    return Sensor(drawn.rig.sensor.lag, noise, memory, step)


def write(file: Path, made: Record, style: Style) -> None:
    """One record as this rig's logger writes it."""
    factor = 1000.0 if style.time_unit == "ms" else 1.0
    lines = [*style.preamble, style.separator.join(style.columns)]
    for t, u, y in zip(made.time * factor, made.command, made.reading, strict=True):
        row = style.separator.join((f"{t:.10g}", f"{u:.6g}", f"{y:.8g}"))
        lines.append(row.replace(".", style.decimal) if style.decimal != "." else row)
    file.write_text("\n".join(lines) + "\n", encoding="utf-8")
