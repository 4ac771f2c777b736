"""Whether 95 % intervals hold the truth in 95 % of records: `python -P tests/campaign/interval_coverage.py`.

Each replicate is a log summed from closed-form step responses plus noise of its own seed; the fit starts from the log
alone. Beside each coverage stands the median width, as a ratio to that of the oracle: the Cramer-Rao width of somebody
who knows the structure, the noise's law and size, and fits gain, dead time, shape and level. An interval that covers
because it is wide shows there.

Two lags that a noisy record shows as a well damped resonance are printed as one, and have no time constants to hold
against the truth's. So time constants are counted where they are printed, and for every record of two lags the natural
frequency and the damping ratio of the same draws are held against those that the truth has in that form.
"""

import argparse
import itertools
import json
import sys
import time as clock
from collections.abc import Callable, Iterator
from concurrent.futures import ProcessPoolExecutor
from dataclasses import asdict, dataclass
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).resolve().parents[1] / "ident"))

import step_sums

SAMPLES, EVERY, LEVEL, DEAD_TIME = 2000, 0.05, 3.0, 0.37
NOMINAL = 95.0

# Name, gain, shape, and how the shape is named in a fit; time constants and frequencies suit 100 s of record.
STRUCTURES: dict[str, tuple[float, tuple[float, ...], tuple[str, ...]]] = {
    "lag": (2.0, (1.3,), ("time constant",)),
    "two lags": (2.0, (1.6, 0.5), ("time constant 1", "time constant 2")),
    "resonance": (2.0, (2.5, 0.15), ("natural frequency", "damping ratio")),
    "integrator": (0.4, (), ()),
    "integrator with lag": (0.4, (0.9,), ("time constant",)),
}
SHAPES: dict[str, Callable[..., Callable]] = {
    "lag": step_sums.lag,
    "two lags": step_sums.two_lags,
    "resonance": step_sums.resonance,
    "integrator": step_sums.integrator,
    "integrator with lag": step_sums.integrator_with_lag,
}
SECOND_ORDER = ("natural frequency", "damping ratio")
COLOURS = {"white": 0.0, "AR 0.5": 0.5, "AR 0.8": 0.8, "AR 0.95": 0.95}
PROFILES = {
    1: ((10.0, 1.0),),
    3: ((10.0, 1.0), (40.0, -0.6), (70.0, 0.0)),
    6: ((8.0, 1.0), (22.0, -0.8), (38.0, 0.5), (54.0, -1.0), (70.0, 0.7), (86.0, 0.0)),
}


@dataclass(frozen=True)
class Cell:
    """One condition: structure, noise colour, signal to noise in dB, steps of the command."""

    structure: str
    colour: str
    decibels: float
    steps: int


def cells() -> Iterator[Cell]:
    """Every condition, in a fixed order; an integrator needs its steps to come back."""
    for structure, colour, decibels, steps in itertools.product(STRUCTURES, COLOURS, (10.0, 25.0, 40.0), PROFILES):
        if steps > 1 or "integrator" not in structure:
            yield Cell(structure, colour, decibels, steps)


def clean(cell: Cell, truth: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Time, command and noise-free response of gain, dead time and shape in `truth`."""
    time = EVERY * np.arange(SAMPLES)
    command = step_sums.steps(time, PROFILES[cell.steps], 0.0)
    if "integrator" in cell.structure:  # back to zero after a second: doublets, not ramps for ever
        command *= np.any([(time >= at) & (time < at + 3.0) for at, _ in PROFILES[cell.steps]], axis=0)
    step = SHAPES[cell.structure](*truth[2:])
    return time, command, LEVEL + step_sums.response(step, truth[0], truth[1], time, command, 0.0)


def second_order(slow: float, fast: float) -> np.ndarray:
    """Natural frequency, rad/s, and damping ratio of two lags, s: 1/sqrt(T1 T2) and (T1 + T2)/(2 sqrt(T1 T2))."""
    return np.array([1.0, 0.5 * (slow + fast)]) / np.sqrt(slow * fast)


def in_both_forms(cell: Cell, truth: np.ndarray) -> np.ndarray:
    """The truth, of two lags followed by its natural frequency and damping ratio."""
    return np.append(truth, second_order(*truth[2:])) if cell.structure == "two lags" else truth


def oracle_widths(cell: Cell, truth: np.ndarray, std: float) -> np.ndarray:
    """Widths of 95 % intervals from the Cramer-Rao bound under the true noise, level unknown too, in both forms."""

    def whitened(columns: np.ndarray) -> np.ndarray:
        rho = COLOURS[cell.colour]
        out = columns.copy()
        out[1:] = (columns[1:] - rho * columns[:-1]) / np.sqrt(1 - rho * rho)
        return out

    columns, forms = [np.ones(SAMPLES)], []
    for i, value in enumerate(truth):
        moved = 1e-4 * max(abs(value), 1e-3) * np.eye(len(truth))[i]
        columns.append((clean(cell, truth + moved)[2] - clean(cell, truth - moved)[2]) / (2 * moved[i]))
        forms.append((in_both_forms(cell, truth + moved) - in_both_forms(cell, truth - moved)) / (2 * moved[i]))
    slopes, into = whitened(np.column_stack(columns)), np.column_stack(forms)
    covariance = std**2 * np.linalg.inv(slopes.T @ slopes)[1:, 1:]
    return 2 * 1.95996 * np.sqrt(np.diag(into @ covariance @ into.T))


def replicate(cell: Cell, seed: int) -> tuple[dict[str, bool], dict[str, float], float]:
    """Whether each interval held its truth, its width over the oracle's, and the CPU seconds of the fit."""
    from gainwright.ident.catalogue import CATALOGUE
    from gainwright.ident.ends import interval_ends
    from gainwright.ident.identify import identify
    from gainwright.ident.run import Run

    rng = np.random.default_rng([seed, *cell.structure.encode(), *cell.colour.encode(), int(cell.decibels), cell.steps])
    gain, shape, names = STRUCTURES[cell.structure]
    truth = np.array([gain, DEAD_TIME * rng.uniform(0.8, 1.2), *(value * rng.uniform(0.8, 1.2) for value in shape)])
    time, command, response = clean(cell, truth)
    std = float(np.std(response)) * 10 ** (-cell.decibels / 20)
    run = Run("log", time, command, response + step_sums.coloured(rng, SAMPLES, std, COLOURS[cell.colour]))
    begin = clock.process_time()
    fit = identify([run], structures=[s for s in CATALOGUE if s.name == cell.structure])
    spent = clock.process_time() - begin
    ends = {p.name: (p.low, p.high) for p in fit.parameters}
    names = ("gain", "dead time", *names)
    if cell.structure == "two lags":
        names = (*names, *SECOND_ORDER)
        square, slope, _ = fit.plant.denominator
        fitted = (1.0 / np.sqrt(square), 0.5 * slope / np.sqrt(square))
        draws = np.exp(fit.draws[:, :2]).T
        ends |= {name: interval_ends(*each) for name, *each in zip(SECOND_ORDER, draws, fitted, strict=True)}
    truth_of = dict(zip(names, in_both_forms(cell, truth), strict=True))
    width_of = dict(zip(names, oracle_widths(cell, truth, std), strict=True))
    held = {name: bool(ends[name][0] <= truth_of[name] <= ends[name][1]) for name in names if name in ends}
    ratio = {name: (ends[name][1] - ends[name][0]) / width_of[name] for name in held}
    return held, ratio, spent


def measure(task: tuple[Cell, int, int]) -> dict:
    """One cell: counts and median widths of each parameter, of the records that print it."""
    cell, replicates, seed = task
    outcomes = [replicate(cell, seed + i) for i in range(replicates)]
    held, asked, width = {}, {}, {}
    for name in dict.fromkeys(name for counts, _, _ in outcomes for name in counts):
        held[name] = sum(counts[name] for counts, _, _ in outcomes if name in counts)
        asked[name] = sum(name in counts for counts, _, _ in outcomes)
        width[name] = float(np.median([ratio[name] for _, ratio, _ in outcomes if name in ratio]))
    spent = float(np.median([spent for _, _, spent in outcomes]))
    return {**asdict(cell), "replicates": replicates, "held": held, "asked": asked, "width": width, "cpu": spent}


def line(row: dict) -> str:
    """One cell as a line of the table."""
    shares = "  ".join(
        f"{name} {100 * count / row['asked'][name]:.1f} % of {row['asked'][name]} (x {row['width'][name]:.2f})"
        for name, count in row["held"].items()
    )
    return f"{row['structure']:20} {row['colour']:8} {row['decibels']:4.0f} dB {row['steps']} steps  {shares}"


def pooled(rows: list[dict], key: str) -> list[str]:
    """Coverage of all parameters by one condition, with its standard error."""
    lines = []
    for value in dict.fromkeys(row[key] for row in rows):
        chosen = [row for row in rows if row[key] == value]
        for name in dict.fromkeys(name for row in chosen for name in row["held"]):
            count = sum(row["held"][name] for row in chosen if name in row["held"])
            total = sum(row["asked"].get(name, 0) for row in chosen)
            share = 100 * count / total
            error = 100 * np.sqrt(max(count * (total - count), 1) / total**3)
            widths = np.median([row["width"][name] for row in chosen if name in row["held"]])
            lines.append(f"{key} {value}: {name:18} {share:5.1f} % +- {error:.1f} of {total}, width x {widths:.2f}")
    return lines


def main() -> int:
    """Runs the cells and prints their table."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--replicates", type=int, default=100)
    parser.add_argument("--seed", type=int, default=0)
    parser.add_argument("--workers", type=int, default=1)
    parser.add_argument("--only", default="", help="cells whose line holds this text")
    parser.add_argument("--lines", type=Path, help="write one JSON line a cell here")
    asked = parser.parse_args()
    chosen = [c for c in cells() if asked.only in f"{c.structure}, {c.colour}, {c.decibels:g} dB, {c.steps} steps"]
    rows = []
    with ProcessPoolExecutor(asked.workers) as pool:
        for row in pool.map(measure, [(cell, asked.replicates, asked.seed) for cell in chosen]):
            rows.append(row)
            print(line(row), flush=True)
            if asked.lines:
                with asked.lines.open("a") as file:
                    file.write(json.dumps(row) + "\n")
    print(f"\nnominal {NOMINAL:g} %")
    print("\n".join(text for key in ("structure", "colour", "decibels", "steps") for text in pooled(rows, key)))
    print(f"median CPU of a fit with intervals: {1e3 * np.median([row['cpu'] for row in rows]):.0f} ms")
    return 0


if __name__ == "__main__":
    sys.exit(main())
