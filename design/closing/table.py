"""A held-out frequency table: measured response against the fitted plant's, within the errors of both."""

from dataclasses import replace

import numpy as np

from ...ident.errors import RecordError
from ...ident.fitted import Fit
from ...ident.identify import identify
from ...ident.run import FloatArray
from ...ident.tables import FittedTable, Table
from ..designed import Design
from ..judge import judge_plants
from ..requirements import ControllerSetting, Limits, Requirements
from .compared import Compared

# Where the loop works, in multiples of the chosen pole's distance from the origin.
_WORKS = np.array([0.2, 0.5, 1.0, 1.5])
# A difference of this share of the plant's response there, beyond what both leave open, means another plant.
_ANOTHER_PLANT = 0.25
# A table that leaves the plant's response this uncertain there could not have shown a change that matters.
_BLIND = 0.4
_PLANTS = 200
_JUDGED = 120
_NORMAL_95 = 1.959964


def compare_table(
    table: Table,
    fit: Fit,
    design: Design,
    *,
    requirements: Requirements,
    limits: Limits,
    setting: ControllerSetting,
) -> Compared:
    """Hold a table against the fitted plant and the chosen gains.

    The table is fitted by itself; its plants are judged, as those of a held-out record in time are.

    Parameters
    ----------
    table : Table
        Not among what was fitted.
    fit, design
        Of the job.
    requirements, limits, setting
        As the gains were designed for.

    Returns
    -------
    Compared
        Its arrays over time are empty; `table` holds the points beside the fitted plant. misfit: rms relative error;
        noise_floor: the same of the table's own errors; coverage_95: of the points within the errors of both.
    """
    alone = _fitted_alone(table, fit)
    shown = _shown(table, fit, alone)
    works = abs(design.selection.pole) * _WORKS
    if table.phase is None:
        return replace(shown, why="it has no phase: sign and dead time of the plant could have changed unseen")
    if table.span[0] > works[2] or table.span[1] < works[2]:
        return replace(
            shown,
            why=f"its frequencies, {table.span[0]:.3g} to {table.span[1]:.3g} rad/s, are not those at which the loop "
            f"works, about {works[2]:.3g} rad/s",
        )
    if alone is None:
        return replace(shown, why="nothing could be fitted to this table: take one of more frequencies")
    share = float(
        np.mean(
            judge_plants(
                design.gains,
                alone.plausible.take(slice(0, _JUDGED)),
                operating_command=fit.operating_command,
                operating_response=fit.operating_response,
                noise=fit.noise if fit.noise.std > 0.0 else None,
                requirements=requirements,
                limits=limits,
                setting=setting,
            ).meets_all
        )
    )
    # Gains that fail on the fitted plants already say nothing about this table.
    wanted = requirements.confidence if design.share_meeting >= requirements.confidence else 0.0
    inside = works[(works >= table.span[0]) & (works <= table.span[1])]
    return replace(shown, **_verdict(fit, alone, inside, share, wanted), share_meeting=share)  # type: ignore[arg-type]


def _fitted_alone(table: Table, fit: Fit) -> Fit | None:
    try:
        return identify(
            (), tables=(table,), operating_command=fit.operating_command, operating_response=fit.operating_response
        )
    except RecordError:
        return None


def _shown(table: Table, fit: Fit, alone: Fit | None) -> Compared:
    """The points beside the fitted plant, without a verdict."""
    model = fit.plant.response_at(table.frequency)
    errors = alone.tables[0] if alone is not None else None
    of_magnitude = errors.magnitude_error if errors else table.relative_errors[0] * table.magnitude
    of_phase = errors.phase_error if errors else table.relative_errors[1]
    if table.phase is None:
        away: FloatArray = np.abs(table.magnitude / np.abs(model) - 1.0)
    else:
        away = np.abs(table.response / model - 1.0)
    own = np.hypot(of_magnitude / table.magnitude, 0.0 if table.phase is None else of_phase)
    both = np.hypot(own, _left_open(fit, table.frequency))
    empty = np.zeros(0)
    return Compared(
        label=table.label,
        time=empty,
        command=empty,
        response=empty,
        predicted=empty,
        low=empty,
        high=empty,
        misfit=float(np.sqrt(np.mean(away**2))),
        noise_floor=float(np.sqrt(np.mean(own**2))),
        coverage_95=float(np.mean(away <= _NORMAL_95 * both)),
        verdict="not comparable",
        why="",
        table=FittedTable(
            table.label, table.frequency, table.magnitude, table.phase, of_magnitude, of_phase, model
        ),
    )


def _left_open(fit: Fit, frequency: FloatArray) -> FloatArray:
    """(m,) relative standard deviation of the response over the plausible plants."""
    ratios = _ratios(fit, fit, frequency)
    return np.asarray(np.sqrt(np.mean(np.abs(ratios - ratios.mean(axis=0)) ** 2, axis=0)))


def _ratios(of: Fit, over: Fit, frequency: FloatArray) -> np.ndarray:
    """(p, m) plausible plants of one fit over the fitted plant of another."""
    fitted = over.plant.response_at(frequency)
    return np.array([plant.response_at(frequency) for plant in of.plausible.plants[:_PLANTS]]) / fitted


def _verdict(fit: Fit, alone: Fit, works: FloatArray, share: float, wanted: float) -> dict[str, str]:
    fresh, known = _ratios(alone, fit, works), _ratios(fit, fit, works)
    middle = np.median(fresh.real, axis=0) + 1j * np.median(fresh.imag, axis=0)
    unsure = float(np.max(np.quantile(np.abs(fresh - middle), 0.95, axis=0)))
    allowed = float(np.max(np.quantile(np.abs(known - 1.0), 0.95, axis=0))) + unsure
    away = float(np.max(np.abs(middle - 1.0)))
    seen = f"at the frequencies at which the loop works the response differs from the fitted plant's by {away:.1%}"
    if unsure > _BLIND:
        why = f"the table leaves the plant's response uncertain by {unsure:.0%} where the loop works: measure it better"
        return {"verdict": "not comparable", "why": why}
    if away > allowed + _ANOTHER_PLANT:
        why = f"another plant than the fitted one: {seen}; {allowed:.1%} are left open"
        return {"verdict": "disagrees", "why": why}
    meets = f"the gains meet everything on {100 * share:.0f} % of the plants that this table makes plausible"
    return {"verdict": "agrees" if share >= wanted else "disagrees", "why": f"{meets}; {seen}"}
