"""The questions that are put to a held-out record, in their order; the first that answers gives the verdict.

Size decides, not significance: a difference that no gain would notice is said and let pass.
"""

from dataclasses import dataclass
from typing import Literal

import numpy as np

from ...ident.confront import Change, Confronted
from ...ident.fitted import Fit

Verdict = Literal["agrees", "disagrees", "not comparable"]

# A difference is real below this chance of none.
REAL = 0.005
# A real difference of this share of the plant's response, where the loop works, means another plant.
_ANOTHER_PLANT = 0.25
# A record that leaves the plant's response this uncertain there could not have shown a change that matters.
_BLIND = 0.4
# A residual of the record's own best fit above this multiple of the fitted noise is not noise, if it shows at all.
_NOT_NOISE, _SHOWS = 3.0, 0.05
# A mode or a dead time doesn't move by itself: beyond these (common practice, no source) something was changed.
_LIGHT, _MODE_MOVED = 0.4, 0.04
_DELAY_MOVED, _DELAY_MATTERS = 0.5, 0.08
_SURE = 5.0
# A prediction that misses by such a multiple of the fitted noise, and by such a share of the response's own movement.
_MISSES = ((2.5, 0.12), (1.5, 0.2))
# A run foretold within this multiple of the fitted noise is not at odds with the fit, whatever it gives by itself.
_FORETOLD = 1.3


@dataclass(frozen=True)
class Finding:
    """A verdict, why, and the share of plausible plants on which the gains hold (None: not judged)."""

    verdict: Verdict
    why: str
    share: float | None


@dataclass(frozen=True, eq=False)
class Evidence:
    """What is known about one fresh record.

    Attributes
    ----------
    fit : Fit
    alone : Confronted
        The record fitted by itself.
    movement : float, response unit
        Standard deviation of its response.
    missed : float, response unit
        rms that the prediction misses, level and drift left free.
    difference, uncertainty : float
        Largest relative difference of the plant's response where the loop works, and how well the record can see it.
    share, wanted : float
        Of the plausible plants on which the gains hold; what is asked for (0: the gains fail anyway).
    """

    fit: Fit
    alone: Confronted
    movement: float
    missed: float
    difference: float
    uncertainty: float
    share: float
    wanted: float

    @property
    def real(self) -> bool:
        """Whether a change of the plant is certain."""
        return self.alone.p_value < REAL

    @property
    def shown(self) -> str:
        """The changes in words, the surest first."""
        changes = sorted(self.alone.changes, key=lambda change: -abs(change.score))
        return ", ".join(_in_words(change, self.fit) for change in changes[:3])


def decide(evidence: Evidence) -> Finding:
    """Put every question in turn."""
    for question in (_unexplained, _moved_by_somebody, _another_plant, _missed, _blind, _at_odds, _fails, _agrees):
        answer = question(evidence)
        if answer:
            return Finding(*answer, evidence.share)
    raise AssertionError("the last question always answers")


Answer = tuple[Verdict, str] | None


def _unexplained(evidence: Evidence) -> Answer:
    noise, left = evidence.fit.noise.std, evidence.alone.noise_std
    if left <= max(_NOT_NOISE * noise, _SHOWS * evidence.movement):
        return None
    return "disagrees", (
        f"no plant of this structure explains the run: residual {left:.3g} rms, noise when fitted {noise:.3g} rms; "
        "look for clipping, friction, a disturbance or a lost sensor"
    )


def _moved_by_somebody(evidence: Evidence) -> Answer:
    moved = _moved(evidence) if evidence.real else ""
    return ("disagrees", f"another plant than the fitted one: {moved} ({evidence.shown})") if moved else None


def _another_plant(evidence: Evidence) -> Answer:
    if not evidence.real or evidence.difference <= _ANOTHER_PLANT:
        return None
    return "disagrees", (
        f"another plant than the fitted one ({evidence.shown}): its response differs by "
        f"{100 * evidence.difference:.0f} % at the speed at which the loop works"
    )


def _missed(evidence: Evidence) -> Answer:
    noise = evidence.fit.noise.std
    times, share = evidence.missed / max(noise, 1e-300), evidence.missed / max(evidence.movement, 1e-300)
    if not any(times > most and share > least for most, least in _MISSES):
        return None
    itself = f"; by itself this run gives {evidence.shown}" if evidence.real else ""
    return "disagrees", (
        f"the prediction misses the run by {evidence.missed:.3g} rms, its level left free; the fitted runs left "
        f"{noise:.3g} rms: the structure lacks something that this run shows, or the plant is another{itself}"
    )


def _blind(evidence: Evidence) -> Answer:
    if evidence.real or evidence.uncertainty <= _BLIND:
        return None
    return "not comparable", (
        f"the run leaves the plant's response uncertain by {100 * evidence.uncertainty:.0f} % at the speed at which "
        "the loop works: take a longer one with larger steps"
    )


def _at_odds(evidence: Evidence) -> Answer:
    if evidence.real or evidence.difference <= _ANOTHER_PLANT:
        return None
    if evidence.missed <= _FORETOLD * evidence.fit.noise.std:
        return None
    return "not comparable", (
        f"by itself this run gives another plant ({evidence.shown}): its response differs by "
        f"{100 * evidence.difference:.0f} % at the speed at which the loop works, and the runs are too short or too "
        "rough to say which is right: take longer ones with larger steps, or look for drift and slow effects that the "
        "structure lacks"
    )


def _fails(evidence: Evidence) -> Answer:
    if evidence.share >= evidence.wanted:
        return None
    per_cent = f"{100 * evidence.share:.0f} % only"
    if evidence.real:
        return "disagrees", (
            f"the plant has changed ({evidence.shown}), and the gains meet everything on {per_cent} of the plants that "
            "this run makes plausible"
        )
    return "disagrees", (
        f"no change of the plant is certain (p = {evidence.alone.p_value:.2g}; {evidence.shown}), but the gains meet "
        f"everything on {per_cent} of the plants that the fitted runs and this one make plausible together: fit this "
        "run too and hold out a fresh one"
    )


def _agrees(evidence: Evidence) -> Answer:
    if not evidence.real:
        return "agrees", f"no change of the plant is visible (p = {evidence.alone.p_value:.2g})"
    return "agrees", (
        f"the plant differs measurably ({evidence.shown}), yet the gains meet everything on "
        f"{100 * evidence.share:.0f} % of the plants that this run makes plausible"
    )


def _moved(evidence: Evidence) -> str:
    """A change that has a mechanical cause whatever the gains make of it; empty where there is none."""
    fit, by_name = evidence.fit, {change.name: change for change in evidence.alone.changes}
    mode = by_name.get("natural frequency")
    damping = next((p.value for p in fit.parameters if p.name == "damping ratio"), 1.0)
    if mode and damping < _LIGHT and abs(mode.score) > _SURE and abs(mode.ratio - 1) > _MODE_MOVED:
        return f"its lightly damped mode has moved by {100 * (mode.ratio - 1):+.1f} %"
    late = by_name["dead time"]
    longer = _seconds(late, fit)
    grown = abs(longer) > _DELAY_MOVED * fit.plant.dead_time and abs(late.ratio - 1) > _DELAY_MATTERS
    if abs(late.score) > _SURE and grown and fit.plant.dead_time > 0:
        return f"its dead time has changed by {longer:+.3g} s"
    return ""


def _in_words(change: Change, fit: Fit) -> str:
    if change.name == "dead time":
        return f"dead time {_seconds(change, fit):+.3g} s"
    if change.ratio < 0:
        return f"{change.name} of the other sign"
    return f"{change.name} {100 * (change.ratio - 1):+.1f} %"


def _seconds(change: Change, fit: Fit) -> float:
    """Change of the dead time, which is stated relative to dead time and slowest time constant together."""
    moving = fit.plant.poles[fit.plant.poles != 0]
    slowest = float(np.max(1.0 / np.maximum(np.abs(moving), 1e-300), initial=0.0))
    return (change.ratio - 1) * (fit.plant.dead_time + slowest)
