"""The verdict on a held-out record: do the gains still hold on the plants that this record makes plausible?

Size decides, not significance: a difference that no gain would notice is said and let pass.
"""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from ...ident.confront import Change, Confronted, confront
from ...ident.fitted import Fit, Plausible
from ...ident.run import Run
from ..designed import Design
from ..judge import judge_plants
from ..requirements import ControllerSetting, Limits, Requirements
from .compared import Compared
from .prediction import Prediction, predict

Verdict = Literal["agrees", "disagrees", "not comparable"]

# A difference is real below this chance of none.
_REAL = 0.005
# A real difference of this share of the plant's response, where the loop works, means another plant.
_ANOTHER_PLANT = 0.25
# A record that leaves the plant's response this uncertain there could not have shown a change that matters.
_BLIND = 0.4
# Where the loop works, in multiples of the chosen pole's distance from the origin.
_WORKS = (0.2, 0.5, 1.0, 1.5)
# A residual of the record's own best fit above this multiple of the fitted noise is not noise.
_NOT_NOISE = 3.0
# A mode or a dead time doesn't move by itself: beyond these (common practice, no source) something was changed.
_LIGHT = 0.4
_MODE_MOVED = 0.04
_DELAY_MOVED = 0.5
_DELAY_MATTERS = 0.08
_SURE = 5.0
_HANDFUL = 15
# A prediction that misses by such a multiple of the fitted noise, and by such a share of the response's own movement.
_MISSES = ((2.5, 0.12), (1.5, 0.2))
_JUDGED = 400
_COMPARED = 200


@dataclass(frozen=True)
class _Finding:
    verdict: Verdict
    why: str
    share: float | None


def compare(
    run: Run,
    fit: Fit,
    design: Design,
    *,
    requirements: Requirements,
    limits: Limits,
    setting: ControllerSetting,
    progress: Callable[[str, float], None] | None = None,
) -> Compared:
    """Hold one fresh record against the fitted plant and the chosen gains.

    Parameters
    ----------
    run : Run
        None of whose samples was fitted.
    fit, design
        Of the job.
    requirements, limits, setting
        As the gains were designed for.

    Returns
    -------
    Compared
    """
    if progress:
        progress(f"comparing with {run.label}", 0.0)
    prediction = predict(run, fit)
    valid = run.valid
    spread = float(np.std(run.response[valid]))
    error = float(np.sqrt(np.mean((run.response - prediction.predicted)[valid] ** 2)))
    inside = (run.response >= prediction.low) & (run.response <= prediction.high)
    found = _judge(run, fit, design, prediction, requirements, limits, setting)
    return Compared(
        label=run.label,
        time=run.time,
        command=run.command,
        response=run.response,
        predicted=prediction.predicted,
        low=prediction.low,
        high=prediction.high,
        misfit=error / spread if spread > 0 else float("inf"),
        noise_floor=fit.noise.std / spread if spread > 0 else float("inf"),
        coverage_95=float(np.mean(inside[valid])),
        verdict=found.verdict,
        why=found.why,
        share_meeting=found.share,
    )


def _judge(
    run: Run,
    fit: Fit,
    design: Design,
    prediction: Prediction,
    requirements: Requirements,
    limits: Limits,
    setting: ControllerSetting,
) -> _Finding:
    if np.ptp(run.command) == 0 and run.start_command == run.command[0]:
        return _Finding("not comparable", "the command never moves in this run: take one with steps of it", None)
    moved = float(np.ptp(prediction.predicted))
    if moved < 4 * fit.noise.std:
        return _Finding(
            "not comparable",
            f"the response should move by {moved:.3g}, hardly more than the noise ({fit.noise.std:.3g} rms): "
            "take a run with larger steps",
            None,
        )
    alone = confront(run, fit)

    def meets(plausible: Plausible) -> NDArray[np.bool_]:
        return judge_plants(
            design.gains,
            plausible.take(slice(0, _JUDGED)),
            operating_command=fit.operating_command,
            operating_response=fit.operating_response,
            noise=fit.noise,
            requirements=requirements,
            limits=limits,
            setting=setting,
        ).meets_all

    share = float(np.mean(meets(alone.plausible)))
    gap = _gap(alone, fit, abs(design.selection.pole))
    # Gains that fail on the fitted plants already say nothing about this run.
    wanted = requirements.confidence if design.share_meeting >= requirements.confidence else 0.0
    if share < wanted and alone.p_value >= _REAL:
        share = _joint_share(alone, meets(fit.plausible), share)
    return _decide(run, fit, alone, gap, _missed(run, fit, prediction), share, wanted)


def _missed(run: Run, fit: Fit, prediction: Prediction) -> float:
    """rms of what the free run misses, apart from a level and, for an integrating plant, a steady drift."""
    valid = run.valid
    away = (run.response - prediction.predicted)[valid]
    time = run.time[valid] - run.time[0]
    free = np.column_stack([np.ones(len(away)), time]) if fit.plant.integrators else np.ones((len(away), 1))
    basis, _ = np.linalg.qr(free)
    return float(np.sqrt(np.mean((away - basis @ (basis.T @ away)) ** 2)))


def _joint_share(alone: Confronted, meets: NDArray[np.bool_], share: float) -> float:
    """Share on which the gains hold of the fitted plants, each weighed by how well it explains the fresh run too.

    Where so few of them explain it that the weights rest on a handful, the fresh run's own share stands.
    """
    count = min(len(meets), len(alone.log_likelihood))
    weights = np.exp(alone.log_likelihood[:count] - alone.log_likelihood[:count].max())
    if np.sum(weights) ** 2 < _HANDFUL * np.sum(weights**2):
        return share
    return float(np.sum(weights * meets[:count]) / np.sum(weights))


@dataclass(frozen=True)
class _Gap:
    """Largest relative difference of the plant's response where the loop works, and how well the run can see it."""

    difference: float
    uncertainty: float


def _gap(alone: Confronted, fit: Fit, distance: float) -> _Gap:
    frequency = distance * np.array(_WORKS)
    fitted = fit.plant.response_at(frequency)
    fresh = np.array([plant.response_at(frequency) for plant in alone.plausible.plants[:_COMPARED]]) / fitted
    middle = np.median(fresh.real, axis=0) + 1j * np.median(fresh.imag, axis=0)
    away = np.quantile(np.abs(fresh - middle), 0.95, axis=0)
    return _Gap(float(np.max(np.abs(middle - 1))), float(np.max(away)))


def _decide(run: Run, fit: Fit, alone: Confronted, gap: _Gap, missed: float, share: float, wanted: float) -> _Finding:
    real = alone.p_value < _REAL
    shown = _shown(alone.changes, fit)
    response = run.response[run.valid]
    if alone.noise_std > _NOT_NOISE * fit.noise.std and alone.noise_std > 0.05 * float(np.std(response)):
        return _Finding(
            "disagrees",
            f"no plant of this structure explains the run: residual {alone.noise_std:.3g} rms, noise when fitted "
            f"{fit.noise.std:.3g} rms; look for clipping, friction, a disturbance or a lost sensor",
            share,
        )
    moved = _moved(alone.changes, fit)
    if real and moved:
        return _Finding("disagrees", f"another plant than the fitted one: {moved} ({shown})", share)
    if real and gap.difference > _ANOTHER_PLANT:
        return _Finding(
            "disagrees",
            f"another plant than the fitted one ({shown}): its response differs by {100 * gap.difference:.0f} % at the "
            "speed at which the loop works",
            share,
        )
    times, share_missed = missed / max(fit.noise.std, 1e-300), missed / float(np.std(response))
    if any(times > most and share_missed > least for most, least in _MISSES):
        return _Finding(
            "disagrees",
            f"the prediction misses the run by {missed:.3g} rms, its level left free; the fitted runs left "
            f"{fit.noise.std:.3g} rms: the structure lacks something that this run shows, or the plant is another",
            share,
        )
    if not real and gap.uncertainty > _BLIND:
        return _Finding(
            "not comparable",
            f"the run leaves the plant's response uncertain by {100 * gap.uncertainty:.0f} % at the speed at which the "
            "loop works: take a longer one with larger steps",
            share,
        )
    if not real and gap.difference > _ANOTHER_PLANT:
        return _Finding(
            "not comparable",
            f"by itself this run gives another plant ({shown}): its response differs by {100 * gap.difference:.0f} % "
            "at the speed at which the loop works, and the runs are too short or too rough to say which is right: take "
            "longer ones with larger steps, or look for drift and slow effects that the structure lacks",
            share,
        )
    if not real and share < wanted:
        return _Finding(
            "disagrees",
            f"no change of the plant is certain (p = {alone.p_value:.2g}; {shown}), but the gains meet everything on "
            f"{100 * share:.0f} % only of the plants that the fitted runs and this one make plausible together: fit "
            "this run too and hold out a fresh one",
            share,
        )
    if not real:
        return _Finding("agrees", f"no change of the plant is visible (p = {alone.p_value:.2g})", share)
    if share < wanted:
        return _Finding(
            "disagrees",
            f"the plant has changed ({shown}), and the gains meet everything on {100 * share:.0f} % only of the plants "
            "that this run makes plausible",
            share,
        )
    return _Finding(
        "agrees",
        f"the plant differs measurably ({shown}), yet the gains meet everything on {100 * share:.0f} % of the plants "
        "that this run makes plausible",
        share,
    )


def _moved(changes: tuple[Change, ...], fit: Fit) -> str:
    """A change that has a mechanical cause whatever the gains make of it; empty where there is none."""
    by_name = {change.name: change for change in changes}
    mode = by_name.get("natural frequency")
    damping = next((p.value for p in fit.parameters if p.name == "damping ratio"), 1.0)
    if mode and damping < _LIGHT and abs(mode.score) > _SURE and abs(mode.ratio - 1) > _MODE_MOVED:
        return f"its lightly damped mode has moved by {100 * (mode.ratio - 1):+.1f} %"
    late = by_name["dead time"]
    longer = (late.ratio - 1) * (fit.plant.dead_time + _slowest(fit))
    grown = abs(longer) > _DELAY_MOVED * fit.plant.dead_time and abs(late.ratio - 1) > _DELAY_MATTERS
    if abs(late.score) > _SURE and grown and fit.plant.dead_time > 0:
        return f"its dead time has changed by {longer:+.3g} s"
    return ""


def _by_itself(alone: Confronted, fit: Fit) -> str:
    """What a run that contradicts the prediction says when it is fitted alone, where that is sure."""
    return f"; by itself this run gives {_shown(alone.changes, fit)}" if alone.p_value < _REAL else ""


def _shown(changes: tuple[Change, ...], fit: Fit) -> str:
    """The changes in words, the surest first."""
    parts = []
    for change in sorted(changes, key=lambda c: -abs(c.score)):
        if change.name == "dead time":
            scale = fit.plant.dead_time + _slowest(fit)
            parts.append(f"dead time {(change.ratio - 1) * scale:+.3g} s")
        else:
            parts.append(f"{change.name} {100 * (change.ratio - 1):+.1f} %")
    return ", ".join(parts[:3])


def _slowest(fit: Fit) -> float:
    moving = fit.plant.poles[fit.plant.poles != 0]
    return float(np.max(1.0 / np.maximum(np.abs(moving), 1e-300), initial=0.0))
