"""The questions that are put to a held-out record, in their order; the first that answers gives the verdict.

Size decides, not significance: a difference that no gain would notice is said and let pass.
"""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

from ...ident.causes import Explained
from ...ident.confront import Confronted
from ...ident.fitted import Fit
from .unseen import Smallest, deciding, hidden_text, smallest_text, unseen
from .words import Units, cause_text, change_text, level_text, seconds, with_unit

Verdict = Literal["agrees", "disagrees", "not comparable"]

# A difference is real below this chance of none, and hinted at below that one.
REAL, _HINT = 0.005, 0.05
# A real difference of this share of the plant's response, where the loop works, means another plant.
_ANOTHER_PLANT = 0.25
# A record that leaves the plant's response this uncertain there could not have shown a change that matters.
_BLIND = 0.4
# A residual of the record's own best fit above such a multiple of the fitted noise is not noise, if it shows as such a
# share of the response's movement.
_NOT_NOISE = ((3.0, 0.05), (1.6, 0.1))
# A mode or a dead time doesn't move by itself: beyond these (common practice, no source) something was changed.
_LIGHT, _MODE_MOVED = 0.4, 0.04
_DELAY_MOVED, _DELAY_MATTERS = 0.5, 0.08
_SURE = 5.0
# A run foretold within this multiple of the fitted noise is not at odds with the fit, whatever it gives by itself.
_FORETOLD = 1.3
# Gains that hold on less than this share of the plants that are left more likely fail than hold.
_LIKELY = 0.5
# A drift that takes away this share of the miss, as nothing else does, is the level's doing, not the plant's.
_DRIFTED = 0.9


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
    explained : Explained
        What the prediction misses, level and drift left free, and what may lie behind it.
    movement : float, response unit
        Standard deviation of its response.
    difference, uncertainty : float
        Largest relative difference of the plant's response where the loop works, and how well the record can see it.
    own, together : float
        Share on which the gains hold: of the plants that this record alone makes plausible; of those that it and the
        fitted runs make plausible together, if nothing has changed.
    wanted : float
        What is asked for (0: the gains fail anyway).
    smallest : tuple of Smallest
        The smallest changes that break something, and how well this record shows each.
    interval : float, s
        Of the log.
    units : Units
    advise : callable
        By what factor the run sees too little (0: unknown) -> the run to take.
    """

    fit: Fit
    alone: Confronted
    explained: Explained
    movement: float
    difference: float
    uncertainty: float
    own: float
    together: float
    wanted: float
    smallest: tuple[Smallest, ...]
    interval: float
    units: Units
    advise: Callable[[float], str]

    @property
    def real(self) -> bool:
        """Whether a change of the plant is certain."""
        return self.alone.p_value < REAL

    @property
    def share(self) -> float:
        """On which the gains hold: of the record's own plants where a change is certain or they do, else together."""
        return self.own if self.real else max(self.own, self.together)

    @property
    def shown(self) -> str:
        """What would explain the gap, with its size; where no single cause does, the changes of the run's own fit."""
        return self._cause or self._changes

    @property
    def _cause(self) -> str:
        level = level_text(self.explained, self.fit, self.units, self.movement)
        cause = cause_text(self.explained, self.fit, self.units, self.interval)
        return "; ".join(text for text in (cause, level) if text)

    @property
    def _changes(self) -> str:
        changes = sorted(self.alone.changes, key=lambda change: -abs(change.score))
        return "by itself this run gives " + ", ".join(change_text(change, self.fit) for change in changes[:3])


def decide(evidence: Evidence) -> Finding:
    """Put every question in turn."""
    questions = (
        _drifted,
        _unexplained,
        _moved_by_somebody,
        _another_plant,
        _blind,
        _at_odds,
        _fails,
        _undecided,
        _could_not_see,
        _agrees,
    )
    for question in questions:
        answer = question(evidence)
        if answer:
            return Finding(*answer, evidence.share)
    raise AssertionError("the last question always answers")


Answer = tuple[Verdict, str] | None


def _drifted(evidence: Evidence) -> Answer:
    explaining = [cause.name for cause in evidence.explained.causes if cause.explains >= _DRIFTED]
    if explaining != ["drift"] or evidence.explained.missed <= _FORETOLD * evidence.fit.noise.std:
        return None
    return "not comparable", (
        f"the response drifts by itself ({evidence.shown}), and that can pass for another plant: wait until "
        f"it stands still, then {evidence.advise(0.0)}"
    )


def _unexplained(evidence: Evidence) -> Answer:
    noise, left = evidence.fit.noise.std, evidence.alone.noise_std
    times, share = left / max(noise, 1e-300), left / max(evidence.movement, 1e-300)
    if not any(times > most and share > least for most, least in _NOT_NOISE):
        return None
    unit = evidence.units.response
    return "disagrees", (
        f"no plant of this structure explains the run: residual {with_unit(left, unit)} rms, noise when fitted "
        f"{with_unit(noise, unit)} rms; look for clipping, friction, a disturbance or a lost sensor ({evidence.shown})"
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


def _blind(evidence: Evidence) -> Answer:
    if evidence.real or evidence.uncertainty <= _BLIND:
        return None
    return "not comparable", (
        f"the run leaves the plant's response uncertain by {100 * evidence.uncertainty:.0f} % at the speed at which "
        f"the loop works: {evidence.advise(evidence.uncertainty / _BLIND)}"
    )


def _at_odds(evidence: Evidence) -> Answer:
    if evidence.real or evidence.difference <= _ANOTHER_PLANT:
        return None
    if evidence.explained.missed <= _FORETOLD * evidence.fit.noise.std:
        return None
    return "not comparable", (
        f"by itself this run gives another plant ({evidence.shown}): its response differs by "
        f"{100 * evidence.difference:.0f} % at the speed at which the loop works, and the runs are too short or too "
        "rough to say which is right; drift or a slow effect that the structure lacks may be behind it: "
        f"{evidence.advise(0.0)}"
    )


def _fails(evidence: Evidence) -> Answer:
    if evidence.share >= min(_LIKELY, evidence.wanted) or (evidence.real and _foretold(evidence)):
        return None
    per_cent = f"{100 * evidence.share:.0f} % only"
    if evidence.real:
        return "disagrees", (
            f"the plant has changed ({evidence.shown}), and the gains meet everything on {per_cent} of the plants that "
            "this run makes plausible"
        )
    return "disagrees", (
        f"no change of the plant is certain (p = {evidence.alone.p_value:.2g}; {evidence.shown}), but the gains meet "
        f"everything on {per_cent} of the plants that the fitted runs and this one make plausible together"
    )


def _foretold(evidence: Evidence) -> bool:
    """Whether the fitted plant foretells the run, its level too; of a drive that friction holds no level is known."""
    level = level_text(evidence.explained, evidence.fit, evidence.units, evidence.movement)
    still = not level or max(evidence.fit.friction) > 0.0
    return still and evidence.explained.missed <= _FORETOLD * evidence.fit.noise.std


def _undecided(evidence: Evidence) -> Answer:
    """Neither shown to hold nor to fail: with a change, or a hint of one, the run's own plants would have to."""
    if evidence.share >= evidence.wanted and (evidence.own >= evidence.wanted or evidence.alone.p_value >= _HINT):
        return None
    own, whose = 100 * evidence.own, "that this run makes plausible by itself"
    if evidence.alone.p_value >= _HINT:
        own, whose = 100 * evidence.share, "that the fitted runs and this one make plausible together"
    sure = "the plant differs" if evidence.real else "the plant may have changed"
    seen = (
        f"{sure} (p = {evidence.alone.p_value:.2g}; {evidence.shown})"
        if evidence.alone.p_value < _HINT
        else (f"no change of the plant is visible (p = {evidence.alone.p_value:.2g})")
    )
    return "not comparable", (
        f"{seen}, and the gains meet everything on {own:.0f} % of the plants {whose}, {100 * evidence.wanted:.0f} % "
        "being asked for: the run can't tell a plant on which they hold from one on which they fail; fit this run too "
        f"and hold out a fresh one: {evidence.advise(0.0)}"
    )


def _could_not_see(evidence: Evidence) -> Answer:
    """A change that breaks something could have passed unseen, and the run's own plants don't rule it out either."""
    hidden = deciding(evidence.smallest)
    if evidence.real or evidence.own >= evidence.wanted or not hidden:
        return None
    return "not comparable", (
        f"the run could not have shown (95 %) {hidden_text(hidden, evidence.units)}, and the gains meet everything on "
        f"{100 * evidence.own:.0f} % only of the plants that it makes plausible by itself: "
        f"{evidence.advise(1.0 / max(hidden[0].visible, 1e-3))}"
    )


def _agrees(evidence: Evidence) -> Answer:
    level = level_text(evidence.explained, evidence.fit, evidence.units, evidence.movement)
    smallest = smallest_text(evidence.smallest, evidence.units)
    if unseen(evidence.smallest) and not evidence.real:
        smallest += f"; the gains hold on {100 * evidence.own:.0f} % of the plants that it makes plausible by itself"
    aside = "".join(f"; {text}" for text in (level, smallest) if text)
    if not evidence.real:
        return "agrees", f"no change of the plant is visible (p = {evidence.alone.p_value:.2g}){aside}"
    return "agrees", (
        f"the plant differs measurably ({evidence.shown}), yet the gains meet everything on "
        f"{100 * evidence.share:.0f} % of the plants that this run makes plausible{'; ' if smallest else ''}{smallest}"
    )


def _moved(evidence: Evidence) -> str:
    """A change that has a mechanical cause whatever the gains make of it; empty where there is none."""
    fit, by_name = evidence.fit, {change.name: change for change in evidence.alone.changes}
    mode = by_name.get("natural frequency")
    damping = next((p.value for p in fit.parameters if p.name == "damping ratio"), 1.0)
    if mode and damping < _LIGHT and abs(mode.score) > _SURE and abs(mode.ratio - 1) > _MODE_MOVED:
        return f"its lightly damped mode has moved by {100 * (mode.ratio - 1):+.1f} %"
    late = by_name["dead time"]
    longer = seconds(late, fit)
    grown = abs(longer) > _DELAY_MOVED * fit.plant.dead_time and abs(late.ratio - 1) > _DELAY_MATTERS
    if abs(late.score) > _SURE and grown and fit.plant.dead_time > 0:
        return f"its dead time has changed by {longer:+.3g} s"
    return ""
