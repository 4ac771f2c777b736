"""What the command does between samples: held or straight, whichever the record supports."""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from .catalogue import LAG, RESONANCE
from .polish import polish
from .regression import Regression
from .run import Run
from .start import first_guesses

# Above this share of samples at which the command moves, the question matters; below, the record is one of steps.
_BUSY = 0.3


def settle_between(runs: Sequence[Run]) -> tuple[tuple[Run, ...], str]:
    """Runs with "auto" resolved, and a sentence about it (empty where nothing had to be decided)."""
    if not any(run.between == "auto" for run in runs):
        return tuple(runs), ""
    if not any(_busy(run) for run in runs):
        return _with(runs, "held"), ""
    cost = {kind: _best_cost(_with(runs, kind)) for kind in ("held", "interpolated")}
    better = min(cost, key=lambda kind: cost[kind])
    worse = max(cost.values())
    ratio = float(np.sqrt(worse / max(cost[better], 1e-300)))
    return _with(runs, better), f"between samples the command is taken as {better} (residual {ratio:.2f} times smaller)"


def _busy(run: Run) -> bool:
    return float(np.mean(np.diff(run.command) != 0)) > _BUSY


def _with(runs: Sequence[Run], kind: str) -> tuple[Run, ...]:
    return tuple(replace(run, between=kind) if run.between == "auto" else run for run in runs)  # type: ignore[arg-type]


def _best_cost(runs: tuple[Run, ...]) -> float:
    costs = []
    for structure in (LAG, RESONANCE):
        problem = Regression(runs, structure, runs[0].start_command, True)
        costs += [polish(problem, theta)[1].cost for theta in first_guesses(problem, 2)]
    return min(costs)
