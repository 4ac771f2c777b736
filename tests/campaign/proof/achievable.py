"""Can the set be met at all? A controller tuned directly on the true rig, every bound tightened by a fifth.

The tuning knows everything: the rig itself, its operating point, its response to every trial. It searches the gains of
P, I, PI, PD and PID with a sampled law of its own, from starting values of the internal-model kind (from memory), by
Nelder-Mead on the worst excess.
"""

from dataclasses import dataclass, replace
from math import copysign
from time import perf_counter

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import minimize
from true_rig import SheetController, TrueRig
from true_rig.controller import Equation

from .asked import Asked
from .families import Drawn
from .judged import AT_LEAST, Values, excess, finer, limit_excess, run_law, tightened
from .margins import frequencies, sampled_plant

TIGHTER = 0.2
SECONDS = 2.5  # of one search
FLOORS = {"gain_margin": 6.0, "phase_margin": 30.0, "peak_sensitivity": 2.0}  # where no margin is asked for
STRUCTURES = {
    "lag with dead time": ("PI", "PID"),
    "two lags": ("PI", "PID"),
    "resonance": ("I", "PI", "PID"),
    "servo with friction": ("P", "PD", "PID"),
    "integrating level": ("P", "PI", "PD"),
    "two resonances": ("I", "PI", "PID"),
    "sticking valve": ("PI", "PID"),
    "slow wall": ("PI", "PID"),
}


@dataclass(frozen=True)
class Tuned:
    """What the best trial reached.

    Attributes
    ----------
    structure : str
    gains : tuple of float
        Proportional, integral, derivative, filter time.
    worst : float
        Largest excess over the tightened bounds, a share of the bound; at most 0 when all are met.
    binding : str
        The requirement of that excess.
    trials : int
    """

    structure: str
    gains: tuple[float, float, float, float]
    worst: float
    binding: str
    trials: int

    @property
    def achievable(self) -> bool:
        return self.worst <= 0.0


def law_of(gains: tuple[float, float, float, float], asked: Asked, rest: float) -> Equation:
    """Backward differences: P and I on the error, filtered D on minus the response; the memory stops wind-up."""
    p, i, d, filter_time = gains
    interval = asked.update_interval
    keep = filter_time / (filter_time + interval) if d else 0.0
    slow = np.array([1.0, -keep]) if d else np.array([1.0])
    proportional = np.polymul([p + i * interval, -p] if i else [p], slow)
    derivative = d / (filter_time + interval) * np.array([1.0, -2.0, 1.0] if i else [1.0, -1.0]) if d else [0.0]
    command = np.polymul([1.0, -1.0], slow) if i else slow
    return Equation(
        interval,
        tuple(command),
        tuple(proportional),
        tuple(_sum_from_front(proportional, np.asarray(derivative))),
        tuple(slow),
        asked.lowest - rest,
        asked.highest - rest,
        asked.rate,
    )


def _sum_from_front(first: NDArray[np.float64], second: NDArray[np.float64]) -> NDArray[np.float64]:
    n = max(len(first), len(second))
    return np.pad(first, (0, n - len(first))) + np.pad(second, (0, n - len(second)))


class Tuning:
    """Trials on one rig."""

    def __init__(self, drawn: Drawn, asked: Asked) -> None:
        self.drawn, self.loose, self.asked = drawn, asked, tightened(asked, TIGHTER)
        self.fine = finer(drawn.rig, asked)
        # the stages are exact for straight inputs, so that trials may step coarsely over the smallest lags
        quick = drawn.times[0] if "resonance" in drawn.family else drawn.base
        self.coarse = replace(drawn.rig, longest_step=min(asked.update_interval / 3.0, 0.3 * quick))
        self.until = perf_counter() + SECONDS
        self.frequency = frequencies(drawn.rig, asked.update_interval, 0.02 / asked.settling)
        self.plant = sampled_plant(drawn.rig, asked.update_interval, asked.computation_delay, self.frequency)
        self.trials = 0
        self.best: Tuned | None = None

    def values(self, gains: tuple[float, float, float, float], settlings: float, rig: TrueRig) -> Values:
        """The gains on the true rig, switched on at its true operating point."""
        rest = self.drawn.rig.command_rest
        law = law_of(gains, self.loose, rest)
        controller = SheetController(law, rest, self.drawn.rig.response_rest)
        return run_law(rig, controller, self.asked, self.plant, self.frequency, settlings, before=0.0)

    def excesses(self, values: Values) -> dict[str, float]:
        """Of every bound and floor, finite so that a simplex can walk on them."""
        asked = self.asked.bounds
        over = {name: excess(name, values.requirements[name], bound) for name, bound in asked.items()}
        if not any(name in asked for name in FLOORS):
            over |= {name: excess(name, values.requirements[name], bound) for name, bound in FLOORS.items()}
        limits = limit_excess(self.loose, values)  # those of the command are kept by the clamp, exactly
        over |= {name: value for name, value in limits.items() if name.startswith("response")}
        bad = max(0.0, 1.0 - values.margins.phase / 60.0) + max(0.0, 1.0 - values.margins.gain / 12.0)
        return {k: min(v, 20.0 + bad) if np.isfinite(v) or v < 0 else 20.0 + bad for k, v in over.items()}

    def trial(self, structure: str, logs: NDArray[np.float64]) -> float:
        """Worst excess of the gains whose logarithms are given."""
        gains = _gains(structure, np.exp(np.clip(logs, -40.0, 40.0)), self.drawn.gain)
        self.trials += 1
        over = self.excesses(self.values(gains, 3.0, self.coarse))
        binding = max(over, key=lambda name: over[name])
        if self.best is None or over[binding] < self.best.worst:
            self.best = Tuned(structure, gains, over[binding], binding, self.trials)
        if over[binding] <= -0.02 or perf_counter() > self.until:
            raise _EnoughError
        return over[binding] + 0.02 * sum(max(v, 0.0) for v in over.values())


class _EnoughError(Exception):
    """Every tightened bound is met, or time is up: no need to go on."""


def _gains(structure: str, sizes: NDArray[np.float64], sign: float) -> tuple[float, float, float, float]:
    each = iter(copysign(float(v), sign) for v in sizes)
    p = next(each) if "P" in structure else 0.0
    i = next(each) if "I" in structure else 0.0
    d = next(each) if "D" in structure else 0.0
    return p, i, d, abs(d / p) / 8.0 if d and p else 0.0


def starts(drawn: Drawn, asked: Asked, structure: str) -> list[NDArray[np.float64]]:
    """Logarithms of starting gains for closed-loop times around what is asked."""
    delay = drawn.delay + 0.5 * asked.update_interval + asked.computation_delay
    gain, wanted = abs(drawn.gain), asked.settling / 5.0
    found = []
    for closed in (max(wanted, delay), max(0.4 * wanted, 0.6 * delay)):
        p, i, d = _start(drawn, gain, closed, delay, structure)
        sizes = {"P": (p,), "I": (i,), "PI": (p, i), "PD": (p, d), "PID": (p, i, d)}[structure]
        found.append(np.log(sizes))
    return found


def _start(drawn: Drawn, gain: float, closed: float, delay: float, structure: str) -> tuple[float, float, float]:
    first = drawn.times[0]
    if drawn.integrating:
        p = 1.0 / (gain * (closed + delay))
        return p, p / (8.0 * (closed + delay)), p * max(first, 0.3 * delay)
    if "resonance" in drawn.family:
        damping = drawn.times[1]
        i = min(1.0 / (closed + delay), 0.5 * damping / first) / gain
        if structure == "PID":
            i = 1.0 / (gain * (closed + delay))
            return 2.0 * damping * first * i, i, first**2 * i
        return 0.3 * damping / gain, i, 0.0
    second = drawn.times[1] if len(drawn.times) > 1 else 0.0
    lag = first if structure == "PID" else first + 0.5 * second
    p = lag / (gain * (closed + delay + (0.0 if structure == "PID" else 0.5 * second)))
    return p, p / lag, p * max(second, 0.3 * delay)


def tune(drawn: Drawn, asked: Asked, budget: int = 120) -> Tuned:
    """The best that a search over the true rig finds; stops as soon as all tightened bounds are met."""
    tuning = Tuning(drawn, asked)
    for structure in STRUCTURES[drawn.family]:
        for start in starts(drawn, asked, structure):
            try:
                minimize(
                    lambda x, s=structure: tuning.trial(s, x), start, method="Nelder-Mead",
                    options={"maxfev": budget // 2, "initial_simplex": _simplex(start), "xatol": 0.01, "fatol": 0.005},
                )  # fmt: skip
            except _EnoughError:
                if _holds_longer(tuning) or perf_counter() > tuning.until:
                    return tuning.best
    _holds_longer(tuning)
    return tuning.best


def _simplex(start: NDArray[np.float64]) -> NDArray[np.float64]:
    return np.vstack([start, *(start + 0.5 * np.eye(len(start)))])


def _holds_longer(tuning: Tuning) -> bool:
    """The trial's horizon is short; the find must hold over the judged one."""
    over = tuning.excesses(tuning.values(tuning.best.gains, 6.0, tuning.fine))
    worst = max(over, key=lambda name: over[name])
    best = tuning.best
    tuning.best = Tuned(best.structure, best.gains, over[worst], worst, tuning.trials)
    return over[worst] <= 0.0


__all__ = ["AT_LEAST", "Tuned", "law_of", "tune"]
