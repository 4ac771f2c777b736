"""What the command does between samples: held or straight, whichever the records support, and how surely."""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from .catalogue import LAG, RESONANCE
from .choose import Fitted, colour_of, fit_candidates, refit
from .run import FloatArray, Run

# Above this share of samples at which the command moves, the question matters; below, the record is one of steps.
# (Set with a record in view whose command moves at every fifth sample.)
_BUSY = 0.1

# Most controllers hold their command (common practice, no source): 19 in 20 before the records are asked.
_HELD_BEFORE = 0.95

# A lag that no structure has smooths the response as a straight command would. In trials on two lags with a third, up
# to a fifth as long and left out, that lowered the residual up to 1.2 times under a held command.
_TOLD_APART = 1.3

# A smaller share than this is not worth a word.
_SHARE = 0.02


@dataclass(frozen=True)
class Between:
    """How the command is taken, and the share of the plausible plants for which it ran the other way.

    A straight line stands for a held command half an interval later: those plants have a dead time shorter or longer
    by `shift`, s.
    """

    kind: str
    words: str = ""
    other_share: float = 0.0
    shift: float = 0.0

    def spread(self, draws: FloatArray, dead_time_at: int) -> FloatArray:
        """(m, k) draws, the dead time in this column moved by `shift` in `other_share` of them, evenly chosen."""
        if not self.other_share:
            return draws
        count = len(draws)
        moved = np.diff(np.floor(np.arange(count + 1) * self.other_share)) > 0
        out = draws.copy()
        out[moved, dead_time_at] = np.maximum(out[moved, dead_time_at] + self.shift, 0.0)
        return out


def settle_between(runs: Sequence[Run]) -> tuple[tuple[Run, ...], Between]:
    """Runs with "auto" resolved, and what was found (in words only where something had to be decided)."""
    if not any(run.between == "auto" for run in runs):
        return tuple(runs), Between(runs[0].between)
    if not any(_busy(run) for run in runs):
        return _with(runs, "held"), Between("held")
    best = {kind: _best(_with(runs, kind)) for kind in ("held", "interpolated")}
    colour = colour_of(min(best.values(), key=lambda f: f.criterion))
    lead = refit(best["held"], colour).criterion - refit(best["interpolated"], colour).criterion
    straight = 1.0 / (1.0 + _HELD_BEFORE / (1 - _HELD_BEFORE) * float(np.exp(-0.5 * np.clip(lead, -600, 600))))
    chosen, other = ("interpolated", "held") if straight > 0.5 else ("held", "interpolated")
    ratio = best[other].misfit / max(best[chosen].misfit, 1e-300)
    words = f"between samples the command is taken as {chosen} (residual {ratio:.3g} times as large when {other})"
    if ratio >= _TOLD_APART:
        return _with(runs, chosen), Between(chosen, words)
    half = 0.5 * best[chosen].problem.interval
    share = straight if chosen == "held" else 0.5
    if share > _SHARE:
        words += f"; the records don't tell it surely, so {share:.0%} of the plausible plants have it {other}"
    return _with(runs, chosen), Between(chosen, words, share, half if chosen == "held" else -half)


def _busy(run: Run) -> bool:
    return float(np.mean(np.diff(run.command) != 0)) > _BUSY


def _with(runs: Sequence[Run], kind: str) -> tuple[Run, ...]:
    return tuple(replace(run, between=kind) if run.between == "auto" else run for run in runs)  # type: ignore[arg-type]


def _best(runs: tuple[Run, ...]) -> Fitted:
    return fit_candidates(runs, runs[0].start_command, True, (LAG, RESONANCE))[0][0]
