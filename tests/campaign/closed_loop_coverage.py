"""Whether 95 % intervals hold the truth in closed loop: `python -P tests/campaign/closed_loop_coverage.py`.

A lag under PI control, exact between samples, whose measurement noise is fed back into the command; the setpoint steps
between two levels at random. The command of a sample has seen that sample's noise. Beside each share stands the median
width of the interval, in per cent of the true gain and lag and in sample intervals of dead time.
"""

import argparse
import itertools
import sys
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).resolve().parents[1] / "ident"))

import step_sums

SAMPLES, EVERY, GAIN, LAG = 3000, 0.1, 2.0, 1.0
NAMES = ("gain", "dead time", "time constant")


@dataclass(frozen=True)
class Cell:
    """Dead time in samples, the noise's memory, and its size where the setpoint's steps are of 2."""

    late: int
    rho: float
    size: float


def cells() -> Iterator[Cell]:
    """Every condition, in a fixed order."""
    yield from (Cell(*each) for each in itertools.product((0, 3), (0.0, 0.5, 0.8), (0.05, 0.2)))


def log(cell: Cell, seed: int) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    """Time, setpoint, command and response; (n,) each."""
    rng = np.random.default_rng([seed, cell.late, int(100 * cell.rho), int(1000 * cell.size)])
    setpoint = np.repeat(rng.choice([-1.0, 1.0], SAMPLES // 40), 40)
    noise = step_sums.coloured(rng, SAMPLES, cell.size, cell.rho)
    decay = np.exp(-EVERY / LAG)
    state = integral = 0.0
    command, response = np.zeros(SAMPLES), np.zeros(SAMPLES)
    for k in range(SAMPLES):
        response[k] = state + noise[k]
        error = setpoint[k] - response[k]
        command[k] = 0.8 * error + integral
        integral += 0.05 * error
        arriving = command[k - cell.late] if k >= cell.late else 0.0
        state = decay * state + GAIN * (1 - decay) * arriving
    return EVERY * np.arange(SAMPLES), setpoint, command, response


def replicate(cell: Cell, seed: int) -> tuple[np.ndarray, np.ndarray]:
    """(3,) whether gain, dead time and lag were held, and the widths of their intervals."""
    from gainwright.ident.catalogue import LAG as ONE_LAG
    from gainwright.ident.identify import identify
    from gainwright.ident.run import Run

    time, setpoint, command, response = log(cell, seed)
    run = Run(
        "log", time, command, response, setpoint, between="held", command_before=0.0, closed_loop=True, at_rest=True
    )
    found = {p.name: p for p in identify([run], structures=[ONE_LAG]).parameters}
    truth = np.array([GAIN, cell.late * EVERY, LAG])
    low, high = np.array([(found[name].low, found[name].high) for name in NAMES]).T
    return (low <= truth) & (truth <= high), high - low


def main() -> int:
    """Runs the cells and prints their table."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--replicates", type=int, default=24)
    parser.add_argument("--seed", type=int, default=0)
    asked = parser.parse_args()
    total = {0: np.zeros(3), 3: np.zeros(3)}
    count = {0: 0, 3: 0}
    for cell in cells():
        outcomes = [replicate(cell, asked.seed + i) for i in range(asked.replicates)]
        held = np.sum([held for held, _ in outcomes], axis=0)
        width = np.median([width for _, width in outcomes], axis=0) / [0.01 * GAIN, EVERY, 0.01 * LAG]
        total[cell.late] += held
        count[cell.late] += asked.replicates
        shares = "  ".join(
            f"{name} {100 * share / asked.replicates:5.1f} % ({wide:.2f} {unit})"
            for name, share, wide, unit in zip(NAMES, held, width, ("%", "samples", "%"), strict=True)
        )
        print(f"dead time {cell.late} samples, AR {cell.rho:g}, noise {cell.size:g}: {shares}", flush=True)
    for late, held in total.items():
        print(f"dead time {late} samples, all: {dict(zip(NAMES, (100 * held / count[late]).round(1), strict=True))} %")
    return 0


if __name__ == "__main__":
    sys.exit(main())
