"""Draws a true rig of a family: its dynamics, its command span, its operating point, its imperfections."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from true_rig import Sensor, TrueRig
from true_rig.linear_stages import Gain, Integrator, Lag, Pair, Resonance, SlowShare, Stage
from true_rig.rough_stages import Actuator, FrictionDrive, StickingValve

COMMANDS = (("V", 0.0, 10.0), ("V", -10.0, 10.0), ("%", 0.0, 100.0), ("mA", 4.0, 20.0), ("A", 0.0, 5.0))
RESPONSES = {  # unit: (smallest and largest swing of a test, smallest and largest operating value)
    "mm": (4.0, 60.0, -50.0, 200.0),
    "degC": (4.0, 30.0, 40.0, 160.0),
    "bar": (0.3, 2.0, 1.5, 6.0),
    "kPa": (4.0, 40.0, 50.0, 200.0),
    "N": (2.0, 50.0, 0.0, 120.0),
    "mrad": (0.5, 8.0, -5.0, 5.0),
    "V": (0.3, 2.0, -2.0, 3.0),
}


@dataclass(frozen=True)
class Drawn:
    """A true rig and what an engineer beside it would know.

    Attributes
    ----------
    family : str
    rig : TrueRig
        Its sensor still without noise.
    command_unit, response_unit : str
    lowest, highest : float, command unit
        The actuator's range.
    rate : float, command unit per s
        The actuator's, infinite where it has none that matters.
    amplitude : float, command unit
        Of the tests.
    swing : float, response unit
        What the amplitude moves, for an integrating rig in the length of one pulse.
    dwell : float, s
        How long one level of a test is held.
    base : float, s
        The time that settling is asked in multiples of.
    delay : float, s
        Dead time and small lags together.
    fastest : float, s
        Shortest lag worth resolving.
    integrating : bool
    gain, times : float, tuple of float
        For starting values of the outside optimiser only.
    """

    family: str
    rig: TrueRig
    command_unit: str
    response_unit: str
    lowest: float
    highest: float
    rate: float
    amplitude: float
    swing: float
    dwell: float
    base: float
    delay: float
    fastest: float
    integrating: bool
    gain: float
    times: tuple[float, ...]


@dataclass(frozen=True)
class Body:
    """The dynamics of a family, for a unit gain; scaled by `draw`."""

    stages: Callable[[float, float], tuple[Stage, ...]]  # (gain, test amplitude) -> stages behind the Gain
    dead_time: float
    dwell: float
    base: float
    times: tuple[float, ...]
    integrating: bool = False
    before: Callable[[float], tuple[Stage, ...]] = lambda amplitude: ()


def log_uniform(generator: np.random.Generator, low: float, high: float) -> float:
    return float(np.exp(generator.uniform(np.log(low), np.log(high))))


def lag_with_dead_time(generator: np.random.Generator, scale: float) -> Body:
    dead = scale * log_uniform(generator, 0.06, 1.0)
    return Body(lambda k, a: (Lag(scale),), dead, dead + scale * generator.uniform(3.5, 6.0), dead + scale, (scale,))


def two_lags(generator: np.random.Generator, scale: float) -> Body:
    second = scale * generator.uniform(0.15, 0.9)
    dead = scale * generator.uniform(0.03, 0.3)
    both = scale + second
    return Body(
        lambda k, a: (Lag(scale), Lag(second)), dead, dead + both * generator.uniform(3.0, 5.0), dead + both,
        (scale, second),
    )  # fmt: skip


def resonance(generator: np.random.Generator, scale: float) -> Body:
    frequency = generator.uniform(1.5, 6.0) / scale
    damping = log_uniform(generator, 0.03, 0.4)
    dead = generator.uniform(0.03, 0.3) / frequency
    ring = 1.0 / (damping * frequency)
    return Body(
        lambda k, a: (Resonance(frequency, damping),), dead, dead + ring * generator.uniform(2.5, 4.0) + 6 / frequency,
        dead + ring + 1.5 / frequency, (1.0 / frequency, damping),
    )  # fmt: skip


def servo_with_friction(generator: np.random.Generator, scale: float) -> Body:
    dead = scale * generator.uniform(0.03, 0.3)
    coulomb = generator.uniform(0.01, 0.05)
    breakaway = coulomb * generator.uniform(1.0, 1.3)

    def stages(k: float, a: float) -> tuple[Stage, ...]:
        return FrictionDrive(scale, coulomb * a * abs(k), breakaway * a * abs(k)), Integrator()

    dwell = dead + scale * generator.uniform(3.0, 5.0)
    return Body(stages, dead, dwell, dead + scale, (scale,), integrating=True)


def integrating_level(generator: np.random.Generator, scale: float) -> Body:
    dead = scale * generator.uniform(0.15, 0.6)
    lag = scale * generator.uniform(0.1, 0.4) if generator.random() < 0.6 else 0.0

    def stages(k: float, a: float) -> tuple[Stage, ...]:
        return (Lag(lag), Integrator()) if lag else (Integrator(),)

    base = dead + lag
    return Body(stages, dead, base * generator.uniform(4.0, 8.0), base, (lag,), integrating=True)


def two_resonances(generator: np.random.Generator, scale: float) -> Body:
    first = generator.uniform(1.5, 4.0) / scale
    second = first * generator.uniform(2.0, 4.0)
    d1, d2 = log_uniform(generator, 0.05, 0.4), log_uniform(generator, 0.03, 0.1)
    weight, dead = generator.uniform(0.03, 0.15), generator.uniform(0.03, 0.2) / first
    ring = 1.0 / (d1 * first)
    return Body(
        lambda k, a: (Pair(Resonance(first, d1), Resonance(second, d2), weight),), dead,
        dead + ring * generator.uniform(2.5, 4.0) + 6 / first, dead + ring + 1.5 / first, (1.0 / first, d1),
    )  # fmt: skip


def sticking_valve(generator: np.random.Generator, scale: float) -> Body:
    body = lag_with_dead_time(generator, scale)
    stick = generator.uniform(0.02, 0.08)
    slide = stick * generator.uniform(0.2, 0.7)
    return Body(
        body.stages, body.dead_time, body.dwell, body.base, body.times,
        before=lambda a: (StickingValve(stick * a, slide * a),),
    )  # fmt: skip


def slow_wall(generator: np.random.Generator, scale: float) -> Body:
    dead = scale * log_uniform(generator, 0.08, 0.6)
    share, slow = generator.uniform(0.08, 0.25), scale * generator.uniform(3.0, 8.0)
    return Body(
        lambda k, a: (Lag(scale), SlowShare(share, slow)), dead, dead + scale * generator.uniform(5.0, 8.0),
        dead + 1.5 * scale, (scale,),
    )  # fmt: skip


FAMILIES: dict[str, Callable[[np.random.Generator, float], Body]] = {
    "lag with dead time": lag_with_dead_time,
    "two lags": two_lags,
    "resonance": resonance,
    "servo with friction": servo_with_friction,
    "integrating level": integrating_level,
}
FURTHER: dict[str, Callable[[np.random.Generator, float], Body]] = {
    "two resonances": two_resonances,
    "sticking valve": sticking_valve,
    "slow wall": slow_wall,
}


def draw(family: str, generator: np.random.Generator) -> Drawn:
    """A rig of the family, every number from the generator."""
    scale = log_uniform(generator, 0.05, 30.0)
    body = (FAMILIES | FURTHER)[family](generator, scale)
    command_unit, lowest, highest, amplitude, rest = _command(family, generator)
    response_unit, swing, level = _response(generator)
    sign = 1.0 if generator.random() < 0.6 else -1.0
    gain = sign * swing / amplitude / (body.dwell if body.integrating else 1.0)
    small = [scale * generator.uniform(0.005, 0.03) if generator.random() < 0.6 else 0.0 for _ in range(2)]
    quick = 4.0 * body.times[0] if "resonance" in family else body.base
    rate = (highest - lowest) / (quick * generator.uniform(0.05, 0.2)) if generator.random() < 0.35 else np.inf
    bend = generator.uniform(-0.08, 0.08) / amplitude if generator.random() < 0.4 and not body.integrating else 0.0
    stages = (
        Actuator(lowest, highest, small[0], float(rate)),
        *body.before(amplitude),
        Gain(gain, rest, bend),
        *body.stages(gain, amplitude),
    )
    fastest = min([lag for lag in small if lag > 0.0] + [t for t in body.times if t > 0.0] + [body.base])
    rig = TrueRig(stages, body.dead_time, rest, level, Sensor(lag=small[1]), fastest / 4.0)
    return Drawn(
        family, rig, command_unit, response_unit, lowest, highest, float(rate), amplitude, swing, body.dwell,
        body.base + sum(small), body.dead_time + sum(small), fastest, body.integrating, gain, body.times,
    )  # fmt: skip


def _command(family: str, generator: np.random.Generator) -> tuple[str, float, float, float, float]:
    """Unit, lowest, highest, test amplitude and resting command."""
    if family == "servo with friction":
        unit, lowest, highest = ("V", -10.0, 10.0) if generator.random() < 0.7 else ("%", -100.0, 100.0)
        place = 0.5 + generator.uniform(-0.005, 0.005)
    else:
        unit, lowest, highest = COMMANDS[generator.integers(len(COMMANDS))]
        place = generator.uniform(0.3, 0.7)
    span = highest - lowest
    return unit, lowest, highest, float(span * generator.uniform(0.06, 0.18)), float(lowest + place * span)


def _response(generator: np.random.Generator) -> tuple[str, float, float]:
    """Unit, swing of a test, operating value."""
    unit = list(RESPONSES)[generator.integers(len(RESPONSES))]
    smallest, largest, low, high = RESPONSES[unit]
    return unit, log_uniform(generator, smallest, largest), float(generator.uniform(low, high))
