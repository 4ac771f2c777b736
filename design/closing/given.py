"""A held-out record against a plant that was given: the record is fitted by itself, and the gains judged on that."""

from dataclasses import replace

import numpy as np

from ...ident.fitted import Fit
from ...ident.run import FloatArray, Run
from ..designed import Design
from ..judge import judge_plants
from ..requirements import ControllerSetting, Limits, Requirements
from .compared import Compared
from .prediction import predict

_ANOTHER_PLANT = 0.25  # distance beyond the tolerance, as a share of the response, that means another plant
_BLIND = 0.4  # a record that leaves the response this uncertain could not have shown a change that matters
_WORKS = np.array([0.2, 0.5, 1.0, 1.5])  # where the loop works, in multiples of the chosen pole's distance
_JUDGED = 400


def compare_given(
    run: Run,
    fit: Fit,
    alone: Fit | None,
    design: Design,
    *,
    requirements: Requirements,
    limits: Limits,
    setting: ControllerSetting,
) -> Compared:
    """Hold a record against a given plant and the gains for it.

    Parameters
    ----------
    fit : Fit
        The given plant in the place of a fit.
    alone : Fit or None
        Of this record by itself; None: nothing could be fitted to it.
    """
    unstable = bool(np.any(fit.plant.poles.real > 1e-9 * np.abs(fit.plant.poles)))
    prediction = predict(run, fit)
    predicted = np.full(len(run.time), np.nan) if unstable else prediction.predicted
    valid = run.valid
    spread = float(np.std(run.response[valid]))
    error = np.nan if unstable else float(np.sqrt(np.mean((run.response - predicted)[valid] ** 2)))
    inside = (run.response >= prediction.low) & (run.response <= prediction.high)
    shown = Compared(
        label=run.label,
        time=run.time,
        command=run.command,
        response=run.response,
        predicted=predicted,
        low=np.full(len(run.time), np.nan) if unstable else prediction.low,
        high=np.full(len(run.time), np.nan) if unstable else prediction.high,
        misfit=error / spread if spread > 0 else float("inf"),
        noise_floor=fit.noise.std / spread if spread > 0 else float("inf"),
        coverage_95=float(np.mean(inside[valid])),
        verdict="not comparable",
        why="nothing could be fitted to this run: take one with larger steps of the command",
        share_meeting=None,
    )
    if unstable:
        return replace(shown, why="the given plant is unstable: a run in open loop can't be predicted")
    if alone is None:
        return shown
    share = _share(alone, design, requirements, limits, setting)
    wanted = requirements.confidence if design.share_meeting >= requirements.confidence else 0.0
    return replace(shown, **_verdict(fit, alone, design, share, wanted), share_meeting=share)  # type: ignore[arg-type]


def _share(alone: Fit, design: Design, requirements: Requirements, limits: Limits, setting: ControllerSetting) -> float:
    """Share of the plants that the record makes plausible which meet everything."""
    verdicts = judge_plants(
        design.gains,
        alone.plausible.take(slice(0, _JUDGED)),
        operating_command=alone.operating_command,
        operating_response=alone.operating_response,
        noise=alone.noise,
        requirements=requirements,
        limits=limits,
        setting=setting,
    )
    return verdicts.share_meeting


def _verdict(fit: Fit, alone: Fit, design: Design, share: float, wanted: float) -> dict[str, str]:
    frequency = abs(design.selection.pole) * _WORKS
    given = fit.plant.response_at(frequency)
    allowed = _distances(fit, frequency, given).max()
    fresh = np.array([p.response_at(frequency) for p in alone.plausible.plants[:_JUDGED]]) / given
    middle = np.median(fresh.real, axis=0) + 1j * np.median(fresh.imag, axis=0)
    unsure = float(np.max(np.quantile(np.abs(fresh - middle), 0.95, axis=0)))
    away = float(np.max(np.abs(middle - 1.0)))
    if unsure > _BLIND:
        why = (
            f"the run leaves the plant's response uncertain by {100 * unsure:.0f} % at the speed at which the loop "
            "works: take a longer one with larger steps"
        )
        return {"verdict": "not comparable", "why": why}
    named, left = ("fitted", "the tables leave open") if fit.tables else ("given", "the tolerance allows")
    seen = f"at the speed at which the loop works its response differs from the {named} plant's by {100 * away:.0f} %"
    if away > allowed + _ANOTHER_PLANT:
        return {"verdict": "disagrees", "why": f"{seen}, {left} {100 * allowed:.0f} %"}
    meets = f"the gains meet everything on {100 * share:.0f} % of the plants that this run makes plausible"
    return {"verdict": "agrees" if share >= wanted else "disagrees", "why": f"{meets}; {seen}"}


def _distances(fit: Fit, frequency: FloatArray, given: np.ndarray) -> FloatArray:
    table = np.array([p.response_at(frequency) for p in fit.plausible.plants[:_JUDGED]])
    return np.asarray(np.abs(table / given - 1.0))
