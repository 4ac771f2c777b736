"""The verdict on a held-out record: do the gains still hold on the plants that this record makes plausible?

Size decides, not significance: a difference that no gain would notice is said and let pass.
"""

from collections.abc import Callable
from dataclasses import dataclass
from functools import partial

import numpy as np
from numpy.typing import NDArray

from ...ident.causes import explain
from ...ident.confront import Confronted, confront
from ...ident.fitted import Fit, Plausible
from ...ident.run import Run
from ..aside import Aside, Pending
from ..designed import Design
from ..judge import PlantVerdicts, judge_plants
from ..local_gain import at_local_gains
from ..requirements import ControllerSetting, Limits, Requirements
from .breaking import breaking_changes
from .compared import Compared
from .loop_run import predict_loop
from .prediction import Prediction, predict
from .rules import REAL, Evidence, Finding, decide
from .run_to_take import run_to_take
from .sight import see
from .unseen import smallest_changes
from .words import NO_UNITS, Units, with_unit

# Where the loop works, in multiples of the chosen pole's distance from the origin.
_WORKS = (0.2, 0.5, 1.0, 1.5)
_HANDFUL = 40
_JUDGED = 400
_COMPARED = 200
_VISIBLE = 20.0  # times the noise: a movement that shows everything


def compare(
    run: Run,
    fit: Fit,
    design: Design,
    *,
    requirements: Requirements,
    limits: Limits,
    setting: ControllerSetting,
    progress: Callable[[str, float], None] | None = None,
    units: Units = NO_UNITS,
    alone: Pending[Confronted] | None = None,
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
    units : Units
        Of command and response, for the words.
    alone : Pending of Confronted, optional
        What the record says by itself, where that work was begun before.

    Returns
    -------
    Compared
    """
    if progress:
        progress(f"comparing with {run.label}", 0.0)
    logged, run = run, fit.through(run)
    looped, how = predict_loop(logged, fit, limits, setting)
    prediction = looped or predict(run, fit)
    valid = run.valid
    spread = float(np.std(run.response[valid]))
    error = float(np.sqrt(np.mean((run.response - prediction.predicted)[valid] ** 2)))
    inside = (run.response >= prediction.low) & (run.response <= prediction.high)
    found = _judge(run, fit, design, prediction, requirements, limits, setting, units, alone)
    return Compared(
        label=run.label,
        time=run.time,
        command=logged.command,
        response=run.response,
        predicted=prediction.predicted,
        low=prediction.low,
        high=prediction.high,
        misfit=error / spread if spread > 0 else float("inf"),
        noise_floor=fit.noise.std / spread if spread > 0 else float("inf"),
        coverage_95=float(np.mean(inside[valid])),
        verdict=found.verdict,
        why=f"{found.why}; {how}" if how else found.why,
        share_meeting=found.share,
        sight=see(run, fit, prediction.predicted, prediction.runs, _band(requirements)),
    )


def _band(requirements: Requirements) -> float | None:
    asked = requirements.find("settling_time")
    return asked.band if asked else None


def begin_comparing(run: Run, fit: Fit, aside: Aside) -> Pending[Confronted] | None:
    """What a held-out record says by itself needs no gains: `aside` may begin with it; None where it says nothing."""
    driven = fit.through(run)
    if np.ptp(np.append(driven.command, driven.start_command)) == 0.0:
        return None
    return aside.start(confront, driven, fit)


def _judge(
    run: Run,
    fit: Fit,
    design: Design,
    prediction: Prediction,
    requirements: Requirements,
    limits: Limits,
    setting: ControllerSetting,
    units: Units,
    pending: Pending[Confronted] | None,
) -> Finding:
    advise = partial(run_to_take, run, fit, limits, units)
    if np.ptp(run.command) == 0 and run.start_command == run.command[0]:
        return Finding("not comparable", f"the command never moves in this run: {advise(0.0)}", None)
    moved = float(np.ptp(prediction.predicted))
    if moved < 4 * fit.noise.std:
        return Finding(
            "not comparable",
            f"the response should move by {with_unit(moved, units.response)}, hardly more than the noise "
            f"({with_unit(fit.noise.std, units.response)} rms), and larger steps are needed: "
            f"{advise(_VISIBLE * fit.noise.std / max(moved, 1e-300))}",
            None,
        )
    alone = confront(run, fit) if pending is None else pending.result()

    def judged(plausible: Plausible, watched: float | None = None) -> PlantVerdicts:
        some = plausible.take(slice(0, _JUDGED))
        return judge_plants(
            design.gains,
            some if watched else at_local_gains(some, fit, requirements),
            operating_command=fit.operating_command,
            operating_response=fit.operating_response,
            noise=fit.noise,
            requirements=requirements,
            limits=limits,
            setting=setting,
            watched=watched,
        )

    mine = judged(alone.plausible)
    own = mine.share_meeting
    gap = _gap(alone, fit, abs(design.selection.pole))
    # Gains that fail on the fitted plants already say nothing about this run.
    wanted = requirements.confidence if design.share_meeting >= requirements.confidence else 0.0
    together = own if own >= wanted or alone.p_value < REAL else _joint_share(alone, judged(alone.joint).meets_all, own)
    pace = 1.0 / max(abs(design.selection.pole), 1e-300)
    breaking = breaking_changes(fit, lambda plants: judged(plants, mine.horizon).meets_all, pace)
    return decide(
        Evidence(
            fit=fit,
            alone=alone,
            explained=explain(run, fit),
            movement=float(np.std(run.response[run.valid])),
            difference=gap.difference,
            uncertainty=gap.uncertainty,
            own=own,
            together=together,
            wanted=wanted,
            smallest=smallest_changes(breaking, alone),
            interval=float(np.median(np.diff(run.time))),
            units=units,
            advise=advise,
        )
    )


def _joint_share(alone: Confronted, meets: NDArray[np.bool_], own: float) -> float:
    """Share on which the gains hold of the fitted plants, each weighed by how well it explains the fresh run too.

    Where so few of them explain it that the weights rest on a handful, the fresh run's own share stands.
    """
    weights = alone.joint_weights[: len(meets)]
    if np.sum(weights) ** 2 < _HANDFUL * np.sum(weights**2):
        return own
    return float(np.sum(weights * meets) / np.sum(weights))


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
