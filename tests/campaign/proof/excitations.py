"""Other tests than levels held one after another: few steps, random levels, sweeps."""

import os

import numpy as np

from .families import Drawn
from .logs import profile

TESTS = "CAMPAIGN_TESTS"  # environment: one of KINDS; default the first
KINDS = ("levels", "few steps", "random levels", "sweep")


def changes_of_test(
    drawn: Drawn, levels: tuple[float, ...], interval: float, generator: np.random.Generator, fit: bool
) -> tuple[list, float]:
    """[(time, command)] of one test and its duration, s. Held-out: levels, unless few steps."""
    kind = os.environ.get(TESTS, KINDS[0])
    if kind == "few steps":
        return _few_steps(drawn, generator, fit)
    if kind == "random levels" and fit:
        return _random_levels(drawn, generator)
    if kind == "sweep" and fit:
        return _sweep(drawn, interval, generator)
    return profile(drawn, levels, generator)


def _few_steps(drawn: Drawn, generator: np.random.Generator, fit: bool) -> tuple[list, float]:
    """One step that stays; one pulse where the response would run away. Held-out: the other way, smaller."""
    size = 1.0 if fit else -0.8
    return profile(drawn, (size, 0.0) if drawn.integrating else (size,), generator)


def _random_levels(drawn: Drawn, generator: np.random.Generator) -> tuple[list, float]:
    """24 random levels, each held for a fifth of a dwell; in pairs that cancel where the response would run away."""
    values = generator.uniform(-1.0, 1.0, 24)
    if drawn.integrating:
        values[1::2] = -values[::2]
    return _held(drawn, [*values, 0.0], drawn.dwell / 5.0)


def _sweep(drawn: Drawn, interval: float, generator: np.random.Generator) -> tuple[list, float]:
    """A sine whose frequency rises evenly in its logarithm, six dwells long, new at every sample of the logger.

    From half a period a dwell to three times the rig's main corner, at least ten samples a period; as a cosine
    where the response would otherwise keep what the first half wave moved.
    """
    length = 6.0 * drawn.dwell
    first = 0.5 / drawn.dwell
    last = min(3.0 / (2.0 * np.pi * drawn.base), 0.1 / interval)
    rate = np.log(max(last / first, 1.01)) / length
    time = interval * np.arange(1, round(length / interval))
    phase = 2.0 * np.pi * first / rate * np.expm1(rate * time)
    wave = np.cos(phase) if drawn.integrating else np.sin(phase)
    rest = drawn.dwell * generator.uniform(0.4, 0.8)
    size = 0.9 * drawn.amplitude
    changes = [(rest + t, drawn.rig.command_rest + size * w) for t, w in zip(time.tolist(), wave.tolist(), strict=True)]
    return [*changes, (rest + length, drawn.rig.command_rest)], rest + length + drawn.dwell


def _held(drawn: Drawn, values: list[float], each: float) -> tuple[list, float]:
    rest = 0.5 * drawn.dwell
    changes = [(rest + i * each, drawn.rig.command_rest + v * drawn.amplitude) for i, v in enumerate(values)]
    return changes, rest + len(values) * each + drawn.dwell
