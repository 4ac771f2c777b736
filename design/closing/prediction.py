"""Prediction of a record that was not fitted: free run of the plant, with the band that parameters and noise leave."""

from dataclasses import dataclass, replace

import numpy as np

from ...ident.fitted import Fit
from ...ident.friction import rough_free_run
from ...ident.regression import starts_unsettled
from ...ident.run import FloatArray, Run

_PLANTS = 120
_NORMAL_95 = 1.959964


@dataclass(frozen=True, eq=False)
class Prediction:
    """What the model says the record should show.

    Attributes
    ----------
    predicted, low, high : (n,) arrays, response unit
    level : float, response unit
        Where the free run starts from.
    runs : (k, n) array, response unit
        Free runs of plausible plants, each about its own operating command.
    """

    predicted: FloatArray
    low: FloatArray
    high: FloatArray
    level: float
    runs: FloatArray


def predict(run: Run, fit: Fit) -> Prediction:
    """Free run of the fitted plant under the record's command, the operating point not refitted.

    A plant that settles stands where the fitted operating point puts it. An integrating one has no such place: it
    starts from the level that the samples before the first move of the command show, its drift there taken off.
    """
    if run.between == "auto":
        run = replace(run, between=fit.between)
    level = 0.0 if fit.plant.integrators else fit.operating_response
    predicted = rough_free_run(fit.plant, run, fit.operating_command, level, fit.friction)
    if fit.plant.integrators:
        level = _start_level(run, predicted)
        predicted = predicted + level
    if starts_unsettled(run):
        predicted = predicted + _initial_motion(run, fit, predicted)
    runs = _plausible_runs(run, fit, level)
    spread = np.std(runs, axis=0) if len(runs) > 1 else np.zeros(len(run.time))
    half = _NORMAL_95 * np.sqrt(spread**2 + fit.noise.std**2)
    return Prediction(predicted, predicted - half, predicted + half, level, runs)


def _initial_motion(run: Run, fit: Fit, predicted: FloatArray) -> FloatArray:
    """(n,) decays of a plant that was moving when the record began, the only thing taken from the record itself."""
    time = run.time - run.time[0]
    columns = [np.ones(len(time))] if fit.plant.integrators else []
    for pole in fit.plant.poles[fit.plant.poles.imag >= 0]:
        if pole == 0:
            continue
        decay = np.exp(np.minimum(pole.real * time, 50.0)) * np.exp(1j * pole.imag * time)
        columns += [decay.real, decay.imag] if pole.imag else [decay.real]
    if not columns:
        return np.zeros(len(time))
    matrix = np.column_stack(columns)
    valid = run.valid
    weights, *_ = np.linalg.lstsq(matrix[valid], (run.response - predicted)[valid], rcond=1e-9)
    return np.asarray(matrix @ weights)


def _start_level(run: Run, from_zero: FloatArray) -> float:
    """Level to add to a free run from zero so that it passes through the samples before the command first moves."""
    moved = np.flatnonzero(np.abs(run.command - run.start_command) > 1e-3 * np.ptp(run.command))
    first = int(moved[0]) if len(moved) else len(run.time)
    above = run.response - from_zero
    rest = above[: max(first, 1)]
    rest = rest[np.isfinite(rest)]
    return float(np.mean(rest)) if len(rest) else float(above[run.valid][0])


def _plausible_runs(run: Run, fit: Fit, level: float) -> FloatArray:
    """(k, n) free runs of plausible plants, each about its own operating command."""
    plausible = fit.plausible.straight.take(slice(0, _PLANTS))
    runs = [
        rough_free_run(plant, run, float(command), level, fit.friction if friction > 0 else (0.0, 0.0))
        for plant, command, friction in zip(
            plausible.plants, plausible.operating_command, plausible.stiction, strict=True
        )
        if plant.integrators == fit.plant.integrators
    ]
    return np.array(runs).reshape(len(runs), len(run.time))
