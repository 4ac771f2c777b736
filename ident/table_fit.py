"""How frequency tables enter a fit: what they need beside them, how much each counts, and what became of them."""

from collections.abc import Sequence

import numpy as np

from .catalogue import Structure
from .choose import Fitted, fit_candidates
from .ensemble import plant_of
from .errors import RecordError
from .run import FloatArray, Run
from .table_regression import TableRegression, Weighed
from .tables import FittedTable, Table

_FEWEST = 6
# Scatter of the points over their stated errors that is worth a word.
_TOO_SMALL, _TOO_LARGE = 1.5, 0.5
_ALONE = (
    "the plant comes from frequency tables alone: they show neither friction, play and bounds of the actuator nor the "
    "noise in time, and hold for the amplitude at which they were taken"
)


def require_tables(
    tables: Sequence[Table], runs: Sequence[Run], operating_command: float | None, operating_response: float | None
) -> None:
    """Refuse tables of which no fit can be made.

    Raises
    ------
    RecordError
        Too few points are left, or there are tables alone and the operating point is not stated.
    """
    where = ", ".join(table.label for table in tables)
    if not runs and (operating_command is None or operating_response is None):
        raise RecordError(
            "a frequency table does not tell where the rig stood",
            where=where,
            found="no operating point, and no run in time beside it",
            expected="command and response from which the deviations start",
            advice="state [operating_point] command and response, or fit a run in time too",
        )
    points = sum(len(table.frequency) for table in tables)
    if not runs and points < _FEWEST:
        raise RecordError(
            "too few frequencies to fit anything",
            where=where,
            found=f"{points} points",
            expected=f"at least {_FEWEST}, and some twenty for intervals that help",
            advice="measure at more frequencies, below and above those at which the loop will work",
        )


def structures_for(
    structures: Sequence[Structure], tables: Sequence[Table], runs: Sequence[Run]
) -> tuple[Structure, ...]:
    """Those that tables can tell of: none with friction, and without any phase none with a zero."""
    blind = not runs and all(table.phase is None for table in tables)
    return tuple(s for s in structures if not s.friction and not (blind and s.zero))


def weigh(
    tables: Sequence[Table],
    runs: tuple[Run, ...],
    reference: float,
    fixed_command: bool,
    structures: Sequence[Structure],
) -> tuple[Weighed, ...]:
    """Tables in units of the noise in time, and along a phase where they have none of their own.

    A table whose errors have no size is fitted by itself first: its scatter is their size. So is one with stated
    errors, which count more where its points scatter more than they say. A table of magnitudes alone takes the phase of
    the plant that the runs (and the other tables) give.
    """
    if not runs and len(tables) == 1:
        return (Weighed(tables[0], tables[0].phase),)
    told = [table for table in tables if table.phase is not None]
    sizes = {id(table): _scatter(table, reference, structures) for table in told}
    if not runs:
        return tuple(Weighed(table, table.phase, 1.0 / sizes.get(id(table), 1.0)) for table in tables)
    alone = fit_candidates(runs, reference, fixed_command, structures)[0][0]
    noise = alone.misfit * alone.problem.movement
    best = plant_of(alone, np.concatenate([alone.theta, alone.solved.coefficients]))
    out = []
    for table in tables:
        phase = np.angle(best.response_at(table.frequency)) if table.phase is None else table.phase
        if id(table) not in sizes:
            away = (table.magnitude / np.abs(best.response_at(table.frequency)) - 1.0) / table.relative_errors[0]
            sizes[id(table)] = max(float(np.sqrt(np.mean(away**2))), 1.0 if table.sized else 1e-9)
        out.append(Weighed(table, phase, noise / sizes[id(table)]))
    return tuple(out)


def _scatter(table: Table, reference: float, structures: Sequence[Structure]) -> float:
    """Scatter of a table's points about their own best plant, in its standard errors; at least one where stated."""
    if len(table.frequency) < _FEWEST:
        return 1.0
    weighed = (Weighed(table, table.phase),)
    best = fit_candidates((), reference, True, structures, None, weighed)[0][0]
    return max(_size(best, slice(None)), 1.0 if table.sized else 1e-9)


def _size(fitted: Fitted, part: slice) -> float:
    """rms of these rows' residual, corrected for the unknowns."""
    problem = fitted.problem
    residual = (problem.measured - problem.columns(fitted.theta) @ fitted.solved.coefficients)[part]
    unknowns = len(fitted.theta) + len(fitted.solved.coefficients)
    free = max(1.0 - unknowns / len(problem.measured), 0.2)
    return float(np.sqrt(np.mean(residual**2) / free))


def fitted_tables(chosen: Fitted, row: FloatArray) -> tuple[FittedTable, ...]:
    """Each table beside the fitted plant, with the errors that its points show or state."""
    problem = chosen.problem
    if not isinstance(problem, TableRegression):
        return ()
    plant, out = plant_of(chosen, row), []
    for w, part in zip(problem.weighed, problem.row_parts, strict=True):
        table = w.table
        scale = 1.0 if table.sized else _size(chosen, part) / w.unit
        of_magnitude, of_phase = (scale * errors for errors in table.relative_errors)
        model = plant.response_at(table.frequency)
        out.append(
            FittedTable(
                table.label,
                table.frequency,
                table.magnitude,
                table.phase,
                of_magnitude * table.magnitude,
                of_phase,
                model,
            )
        )
    return tuple(out)


def table_cautions(chosen: Fitted) -> tuple[str, ...]:
    """What tables alone don't show, and those whose points scatter otherwise than their stated errors say."""
    problem = chosen.problem
    if not isinstance(problem, TableRegression):
        return ()
    said = [] if problem.runs else [_ALONE]
    for w, part in zip(problem.weighed, problem.row_parts, strict=True):
        times = _size(chosen, part) / w.unit
        if w.table.sized and not _TOO_LARGE < times < _TOO_SMALL:
            said.append(
                f"{w.table.label}: the points lie {times:.2g} times their stated errors from the fitted plant; the "
                "intervals go by the points"
            )
    return tuple(said)
