"""Frequency tables in the rig file: which keys they take, and what each column is."""

from .messages import Problems
from .rig import Signal
from .schema import RigFile, RunPart

KIND = "frequency-table"
TABLE_ROLES = ("frequency", "magnitude", "phase", "coherence", "magnitude_error", "phase_error")
# What only a log in time has.
_OF_TIME = ("from_", "to", "before", "signals", "current")


def is_table(run: RunPart) -> bool:
    """Whether a run is a frequency table."""
    return run.excitation == KIND


def check_tables(shape: RigFile, problems: Problems) -> None:
    """Keys of tables only on tables, and of logs in time only on those; an operating point from somewhere."""
    for number, run in enumerate(shape.runs, 1):
        given = [role for role in TABLE_ROLES if getattr(run, role) is not None]
        if not is_table(run):
            if given:
                problems.add(
                    f"runs[{number}].{given[0]}",
                    "only a frequency table has this column",
                    f'excitation = "{run.excitation}"',
                    f'excitation = "{KIND}"',
                )
            continue
        for role in ("frequency", "magnitude"):
            if getattr(run, role) is None:
                problems.add(
                    f"runs[{number}].{role}", "this key is missing", expected='such as { source = "f_Hz", unit = "Hz" }'
                )
        for name in _OF_TIME:
            if getattr(run, name) is not None:
                problems.add(f"runs[{number}].{name.rstrip('_')}", "a frequency table has no time, and none of this")
        if run.loop == "closed":
            problems.add(
                f"runs[{number}].loop",
                "a table of response over command taken in closed loop is biased by the feedback",
                '"closed"',
                "the log in time that the table was made of",
            )
    _require_operating_point(shape, problems)


def _require_operating_point(shape: RigFile, problems: Problems) -> None:
    fitted = [run for run in shape.runs if run.use == "fit"]
    timed = [run for run in shape.runs if not is_table(run)]
    if not fitted or timed or shape.plant is not None:
        return
    for name in ("command", "response"):
        if getattr(shape.operating_point, name) is None:
            problems.add(
                f"operating_point.{name}",
                "a frequency table does not tell where the rig stood",
                "no value, and no run in time",
                "the steady reading at which the table was taken",
            )


def table_signals(number: int, run: RunPart, problems: Problems) -> dict[str, Signal]:
    """The columns of a table by role."""
    out = {}
    for role in TABLE_ROLES:
        part = getattr(run, role)
        if part is None:
            continue
        key = f"runs[{number}].{role}"
        if part.source is None:
            problems.add(key, "needs a source", "none", 'such as { source = "column name" }')
        if part.scale == 0.0:
            problems.add(f"{key}.scale", "a scale of zero wipes the column out", "0", "any other number")
        out[role] = Signal(part.source, part.unit, scale=part.scale, offset=part.offset, lost_as=tuple(part.lost_as))
    return out
