"""Random loops and an independent count of unstable roots for the tests of the locus."""

import numpy as np
from gainwright.design.locus.loop import OpenLoop


def random_loop(rng: np.random.Generator) -> OpenLoop:
    """Up to five poles from 0.1 to 30 rad/s: lags, integrators, modes down to damping 0.002, a quarter of them
    unstable; fewer zeros, either sign, dead time in four of five, a hold in two of five."""
    order = int(rng.integers(1, 6))
    poles = _roots(rng, order, least_damping=-2.7, integrators=0.15)
    zeros = _roots(rng, int(rng.integers(0, order)), least_damping=-2.5, integrators=0.0)
    lead = 10 ** rng.uniform(-1, 1) * rng.choice([1, 1, 1, -1])
    hold = float(10 ** rng.uniform(-2, 0)) if rng.random() < 0.4 else None
    dead_time = float(10 ** rng.uniform(-2, 0.5)) if rng.random() < 0.8 else 0.0
    return OpenLoop(tuple(lead * np.atleast_1d(np.poly(zeros)).real), tuple(np.poly(poles).real), dead_time, hold)


def _roots(rng: np.random.Generator, count: int, *, least_damping: float, integrators: float) -> list[complex]:
    roots: list[complex] = []
    while len(roots) < count:
        size, kind = 10 ** rng.uniform(-1, 1.5), rng.random()
        if kind < 0.35 and len(roots) + 2 <= count:
            damping = 10 ** rng.uniform(least_damping, 0) * rng.choice([1, 1, 1, -1])
            root = size * complex(-damping, np.sqrt(1 - damping**2))
            roots += [root, root.conjugate()]
        elif 0.35 <= kind < 0.35 + integrators:
            roots.append(0j)
        else:
            roots.append(complex(-size * rng.choice([1, 1, 1, -1])))
    return roots


def unstable_count(loop: OpenLoop, gain: float) -> float:
    """Z = P + winding of 1 + K G_L about zero along Re s = 1e-7, from numpy's polynomials only.

    The line ends where |K G_L| < 0.3 for good; the way back at infinity then turns by the difference of the ends. It is
    sampled until no step turns by more than 0.3 rad.
    """
    above, below = np.array(loop.numerator), np.array(loop.denominator)
    poles = np.roots(below)

    def value(w: np.ndarray) -> np.ndarray:
        s = 1e-7 + 1j * w
        curve = gain * np.polyval(above, s) / np.polyval(below, s) * np.exp(-s * loop.dead_time)
        return 1.0 + (curve if loop.hold is None else curve * (1.0 - np.exp(-s * loop.hold)) / (s * loop.hold))

    trial = np.geomspace(1.0, 1e9, 3000)
    rational = gain * np.abs(np.polyval(above, 1j * trial) / np.polyval(below, 1j * trial))
    rational = rational if loop.hold is None else rational * np.minimum(1.0, 2.0 / (trial * loop.hold))
    last = np.flatnonzero(rational >= 0.3)
    end = trial[last[-1] + 1] if last.size else 2.0
    delay = loop.dead_time + (loop.hold or 0.0)
    beside = np.concatenate(
        [np.abs(p.imag) + np.geomspace(1e-9, 1.0, 400) * end * side for p in poles for side in (-1, 1)]
    )
    even = np.linspace(0.0, end, 2000 + int(8 * end * delay))
    w = np.unique(np.concatenate([even, beside[(beside > 0.0) & (beside < end)]]))
    for _ in range(30):
        curve = value(w)
        wide = np.flatnonzero(np.abs(np.angle(curve[1:] / curve[:-1])) > 0.3)
        if wide.size == 0 or w.size > 2_000_000:
            break
        w = np.insert(w, wide + 1, 0.5 * (w[wide] + w[wide + 1]))
    turn = np.angle(curve[1:] / curve[:-1]).sum() - np.angle(curve[-1])  # upper half, closed to +1 at infinity
    return float(np.sum(poles.real > 1e-7) - turn / np.pi)
