"""Times as processor seconds of this process, medians of several runs, and the pass that everything is held against."""

import time
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy.signal import lfilter


@dataclass(frozen=True)
class Line:
    """One measured thing.

    Attributes
    ----------
    group, what : str
    seconds : float
        Processor time, median.
    beside : tuple of (name, ratio)
        How many times longer the other way takes, or how many passes or per cent this is, as the name says.
    """

    group: str
    what: str
    seconds: float
    beside: tuple[tuple[str, float], ...] = ()

    def __str__(self):
        ratios = ", ".join(f"{name} {ratio:.3g}" for name, ratio in self.beside)
        return f"| {self.group} | {self.what} | {1e3 * self.seconds:.3g} ms | {ratios} |"


def seconds(call: Callable[[], object], times: int = 5) -> float:
    """Median processor time of a call, s, after one that does not count."""
    call()
    taken = []
    for _ in range(times):
        begun = time.process_time()
        call()
        taken.append(time.process_time() - begun)
    return float(np.median(taken))


def once(call: Callable[[], object]) -> float:
    """Processor time of one call, s."""
    begun = time.process_time()
    call()
    return time.process_time() - begun


def one_pass(samples: int) -> float:
    """Processor time of one real first-order `lfilter` over so many samples, s, median of 15."""
    drive = np.random.default_rng(0).standard_normal(samples)
    return max(seconds(lambda: lfilter([0.0, 1.0], [1.0, -0.9], drive), 15), 1e-9)


def slope(sizes, times) -> float:
    """Log-log slope of cost against size: 1 is proportional, 0 is no growth."""
    return float(np.polyfit(np.log(sizes), np.log(times), 1)[0])
