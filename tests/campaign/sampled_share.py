"""How many sets are still met when the controller samples seldom: 40, 20 and 10 samples in an ultimate period.

`python -P tests/campaign/sampled_share.py --sets 40`

Each set is met on the true plant, every bound tightened by a fifth, by a controller of the judge's own that samples 200
times in the period; the program designs for the longer interval. Wanted: at 20 samples 95 %, at 10 90 %. Right means:
the design is whole, and its shipped law keeps every bound on the truth by a simulation of its own (fair_loop.py).
"""

import argparse
import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parent))

import numpy as np
from against_rules import asked_of, equation_of, judged, searched
from fair_sets import draw_problem, kept
from gainwright.design.slow_controller import slow_controller
from gainwright.ident.plant import Plant

CONTINUOUS = 200.0  # samples a period of the tuning


def one(seed, index, kind, samples):
    """Whether the design is whole, keeps the bounds on the truth, on fresh plants, and is said to be slow."""
    problem = draw_problem(seed, index, kind, samples, tuned_at=CONTINUOUS)
    if problem is None:
        return None
    design = searched(problem, index)
    model = problem.fit.model
    nominal = Plant((model.gain,), model.denominator, model.dead_time)
    said = bool(slow_controller(design.gains, nominal, asked_of(problem)["setting"]))
    share = judged(problem, design.gains, index)
    return not design.reasons, kept(problem, equation_of(design.law)), share >= 0.95, said


def main() -> None:
    """Print a line for each pace."""
    ask = argparse.ArgumentParser(description=__doc__)
    ask.add_argument("--sets", type=int, default=40)
    ask.add_argument("--first", type=int, default=0)
    ask.add_argument("--seed", type=int, default=1)
    ask.add_argument("--kind", choices=("tight", "loose"), default="tight")
    ask.add_argument("--samples", type=float, nargs="+", default=[40.0, 20.0, 10.0])
    given = ask.parse_args()
    print(f"{given.kind} sets, seed {given.seed}, indices from {given.first}")
    for samples in given.samples:
        every, index = [], given.first
        while len(every) < given.sets:
            found = one(given.seed, index, given.kind, samples)
            if found is not None:
                every.append(found)
                if not all(found[:3]):
                    print(f"  {samples:g} samples, index {index}: found, truth, fresh = {found[:3]}", flush=True)
            index += 1
        table = np.array(every)
        whole, truth, fresh, said = 100.0 * table.mean(axis=0)
        right = 100.0 * np.mean(table[:, :3].all(axis=1))
        wrong = int(np.sum(table[:, 0] & ~table[:, 1]))
        print(
            f"{samples:g} samples a period: right {right:.1f} % of {len(every)} (found {whole:.1f} %, on the truth "
            f"{truth:.1f} %, on fresh plants {fresh:.1f} %); found and wrong on the truth {wrong}; "
            f"said to be slow {said:.1f} %",
            flush=True,
        )


if __name__ == "__main__":
    main()
