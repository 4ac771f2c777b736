"""How often the structure is chosen right: `python -P tests/campaign/structure_choice.py --replicates 40`.

A random plant of each structure, its response in closed form, a log of six steps with noise of its own; the fit has the
log alone and chooses. Right: the true structure, for the five of the first table; for the whole catalogue the true one
or in a tie of at most three.
"""

import argparse
import sys
from collections.abc import Callable
from concurrent.futures import ProcessPoolExecutor
from pathlib import Path

import numpy as np
from scipy.signal import lfilter

sys.path.insert(0, str(Path(__file__).resolve().parents[1] / "ident"))

import step_sums

SAMPLES, EVERY = 1500, 0.05
FIVE = ("lag", "two lags", "resonance", "integrator", "integrator with lag")
FURTHER = ("gain", "lag with zero", "two lags with zero", "resonance with zero", "double integrator with lag",
           "resonance behind a lag")  # fmt: skip
PROFILE = ((6.0, 1.0), (18.0, -0.8), (30.0, 0.5), (42.0, -1.0), (54.0, 0.7), (66.0, 0.0))
PULSE = 2.0


def _lag_impulse(t, slow):
    return np.exp(-t / slow) / slow


def _two_lags_impulse(t, slow, fast):
    return (np.exp(-t / slow) - np.exp(-t / fast)) / (slow - fast)


def _resonance_impulse(t, frequency, damping):
    ringing = frequency * np.sqrt(1 - damping**2)
    return frequency**2 / ringing * np.exp(-damping * frequency * t) * np.sin(ringing * t)


def _behind_a_lag(slow, frequency, damping):
    """Step response of wn^2/((T s + 1)(s^2 + 2 z wn s + wn^2)) from its three residues."""
    poles = np.roots([slow, 1 + 2 * damping * frequency * slow, 2 * damping * frequency + slow * frequency**2,
                      frequency**2])  # fmt: skip
    slopes = [slow * np.prod([p - q for q in poles if q != p]) * p for p in poles]
    return lambda t: 1 + np.real(sum(frequency**2 / d * np.exp(p * t) for p, d in zip(poles, slopes, strict=True)))


def _double(slow):
    """Step response of 1/(s^2 (T s + 1))."""
    return lambda t: t**2 / 2 - slow * t - slow**2 * np.expm1(-t / slow)


def plant(name: str, rng: np.random.Generator) -> tuple[float, float, Callable]:
    """Gain, dead time and unit step response of a random plant; a zero is 40 % or more away from every lag."""
    slow = float(np.exp(rng.uniform(np.log(0.5), np.log(2.5))))
    fast = slow * rng.uniform(0.2, 0.8)
    frequency, damping = 2.0 / slow, float(np.exp(rng.uniform(np.log(0.05), np.log(0.8))))
    zero = slow * rng.choice([rng.uniform(-1.0, -0.3), rng.uniform(1.4, 2.5)])
    gain = float(rng.choice([-1, 1]) * np.exp(rng.uniform(np.log(0.3), np.log(3.0))))
    dead_time = float(rng.uniform(0.0, 1.0)) * slow
    steps: dict[str, Callable] = {
        "gain": lambda t: np.ones_like(t),
        "lag": step_sums.lag(slow),
        "two lags": step_sums.two_lags(slow, fast),
        "resonance": step_sums.resonance(frequency, damping),
        "integrator": step_sums.integrator(),
        "integrator with lag": step_sums.integrator_with_lag(slow),
        "lag with zero": lambda t: step_sums.lag(slow)(t) + zero * _lag_impulse(t, slow),
        "two lags with zero": lambda t: (
            step_sums.two_lags(slow, fast)(t) + zero * _two_lags_impulse(t, slow, fast)
        ),
        "resonance with zero": lambda t: (
            step_sums.resonance(frequency, damping)(t) + zero * _resonance_impulse(t, frequency, damping)
        ),
        "double integrator with lag": _double(slow),
        "resonance behind a lag": _behind_a_lag(slow, frequency, min(damping, 0.4)),
    }
    return gain, dead_time, steps[name]


def log(name: str, decibels: float, rho: float, seed: int):
    """A record of one random plant."""
    from gainwright.ident.run import Run

    rng = np.random.default_rng([seed, *name.encode(), int(decibels), int(100 * rho)])
    gain, dead_time, step = plant(name, rng)
    time = EVERY * np.arange(SAMPLES)
    command = step_sums.steps(time, PROFILE, 0.0)
    if "integrator" in name:
        edges = np.array([at for at, _ in PROFILE])
        command *= np.any((time >= edges[:, None]) & (time < edges[:, None] + PULSE), axis=0)
    if "double" in name:  # doublets, so that the speed comes back too
        command = command - np.roll(command, int(PULSE / EVERY))
    response = step_sums.response(step, gain, dead_time, time, command, 0.0)
    noise = lfilter([1.0], [1.0, -rho], rng.standard_normal(SAMPLES + 400))[400:] * np.sqrt(1 - rho**2)
    return Run(name, time, command, 3.0 + response + float(np.std(response)) * 10 ** (-decibels / 20) * noise)


def chosen(task: tuple[str, float, float, int, bool]) -> tuple[str, tuple[str, ...]]:
    """The structure chosen, and those that tie with it."""
    from gainwright.ident.catalogue import CATALOGUE
    from gainwright.ident.identify import identify

    name, decibels, rho, seed, five = task
    structures = [s for s in CATALOGUE if s.name in FIVE] if five else CATALOGUE
    fit = identify([log(name, decibels, rho, seed)], structures=structures)
    return fit.structure, fit.ties


def main() -> int:
    """Runs the conditions and prints their table."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--replicates", type=int, default=40)
    parser.add_argument("--seed", type=int, default=0)
    parser.add_argument("--workers", type=int, default=1)
    parser.add_argument("--only", default="", help="lines that hold this text: five, whole, 20 dB, 35 dB, white, AR")
    asked = parser.parse_args()
    with ProcessPoolExecutor(asked.workers) as pool:
        for five, decibels, rho in [(f, d, r) for f in (True, False) for d in (20.0, 35.0) for r in (0.0, 0.8)]:
            title = f"{'five' if five else 'whole catalogue'}, {decibels:g} dB, {'AR 0.8' if rho else 'white'}"
            if asked.only not in title:
                continue
            names = FIVE if five else FIVE + FURTHER
            tasks = [(n, decibels, rho, asked.seed + i, five) for n in names for i in range(asked.replicates)]
            outcomes = list(pool.map(chosen, tasks))
            right = dict.fromkeys(names, 0)
            first, tied, wrong = 0, 0, []
            for (name, _, _, seed, _), (found, ties) in zip(tasks, outcomes, strict=True):
                among = found == name or (name in ties and len(ties) <= 2)
                right[name] += among
                first += found == name
                tied += bool(ties)
                if not among:
                    wrong.append(f"{name} {seed}: {found}")
            total = len(tasks)
            shares = [100 * count / total for count in (first, sum(right.values()), tied)]
            words = "{}: the true one {:.1f} %, or in a tie of at most three {:.1f} %, ties in {:.1f} %"
            print(words.format(title, *shares))
            print("    " + ", ".join(f"{n} {100 * c / asked.replicates:.0f} %" for n, c in right.items()))
            print("    " + "; ".join(wrong), flush=True)
    return 0


if __name__ == "__main__":
    sys.exit(main())
