"""Made records for the benchmarks: three plants with dead time, six command steps or random levels, coloured noise."""

import numpy as np
from gainwright.ident.plant import Plant
from gainwright.ident.run import Run
from gainwright.ident.simulate import free_run
from scipy.signal import lfilter

PLANTS = {
    "lag": Plant((2.0,), (0.5, 1.0), 0.13),
    "resonance": Plant((1.5,), (1 / 16.0, 0.1, 1.0), 0.11),
    "integrator with lag": Plant((0.8,), (0.4, 1.0, 0.0), 0.09),
}
# A start for every way of fitting: shapes 20 % high, dead time 20 % low.
STARTS = {"lag": [0.6], "resonance": [4.8, 0.24], "integrator with lag": [0.48]}
LEVELS = np.array([0.0, 1.0, 0.2, -0.8, 0.3, 1.2, 0.0])
AT = 30.0 * np.array([0.0, 0.08, 0.22, 0.38, 0.55, 0.7, 0.85])


def record(plant: str, samples: int, rho: float = 0.0, seed: int = 0, *, busy: bool = False) -> Run:
    """30 s at 30 dB; noise with this lag-one correlation; `busy`: a new random level at every tenth sample."""
    rng = np.random.default_rng(seed)
    time = 30.0 / samples * np.arange(samples)
    command = LEVELS[np.searchsorted(AT, time, side="right") - 1]
    if busy:
        command = np.repeat(rng.standard_normal(samples // 10 + 1), 10)[:samples]
        command[: samples // 20] = 0.0
    quiet = free_run(PLANTS[plant], Run("made", time, command, np.zeros(samples), between="held"), 0.0, 3.0)
    noise = lfilter([np.sqrt(1 - rho**2)], [1.0, -rho], rng.standard_normal(samples))
    return Run("made", time, command, quiet + 10**-1.5 * np.std(quiet) * noise, between="held")
