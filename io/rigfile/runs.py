"""The runs of a rig file: files that exist, windows that don't overlap, signals with the overrides of each run."""

import math
from dataclasses import replace
from pathlib import Path

from .. import units
from .in_force import build_in_force, require_known_command
from .messages import Problems, listed, nearest
from .quantities import Quantities
from .rig import RunSpec, Signal
from .schema import RigFile, RunPart, SignalPart, Signals
from .table_runs import is_table, table_signals

ROLES = ("time", "command", "response", "setpoint")
Window = tuple[float, float]


def find_files(runs: list[RunPart], folder: Path, problems: Problems) -> list[list[Path]]:
    """The files of each [[runs]] table, patterns expanded and sorted."""
    return [_files_of(f"runs[{number}].file", run.file, folder, problems) for number, run in enumerate(runs, 1)]


def logged_roles(shape: RigFile) -> frozenset[str]:
    """Signals that at least one run has in its log."""
    timed = [run for run in shape.runs if not is_table(run)]
    return frozenset(role for run in timed for role in signals_of(shape.signals, run))


def _files_of(key: str, pattern: str, folder: Path, problems: Problems) -> list[Path]:
    try:
        return _found(key, pattern, folder, problems)
    except (OSError, ValueError) as problem:  # too long, a zero sign, "**" inside a name, a folder that can't be listed
        why = (problem.strerror if isinstance(problem, OSError) else None) or str(problem)
        shown = pattern if len(pattern) < 100 else pattern[:60] + " ..."
        problems.add(key, "this can't be the name or pattern of a file", f'"{shown}": {why}', 'such as "step_*.csv"')
        return []


def _found(key: str, pattern: str, folder: Path, problems: Problems) -> list[Path]:
    named = folder / pattern
    if named.is_file():
        return [named.resolve()]
    if not any(sign in pattern for sign in "*?["):
        near = _names_near(named)
        what = "this is a folder, not a log" if named.is_dir() else "no such file"
        problems.add(key, what, f'"{pattern}"', listed(near, 6), nearest(named.name, near))
        return []
    matches = sorted(path.resolve() for path in _glob(folder, pattern) if path.is_file())
    if not matches:
        near = _names_near(named)
        problems.add(key, "this pattern matches no file", f'"{pattern}"', listed(near, 6), nearest(named.name, near))
    return matches


def _glob(folder: Path, pattern: str) -> list[Path]:
    base = Path(pattern)
    if base.is_absolute():
        return list(Path(base.anchor).glob(str(base.relative_to(base.anchor))))
    return list(folder.glob(pattern))


def _names_near(named: Path) -> list[str]:
    """Names of the files beside the one that was asked for."""
    try:
        return sorted(path.name for path in named.parent.iterdir() if path.is_file())[:200]
    except OSError:
        return []


def signals_of(shape: Signals, run: RunPart | None = None) -> dict[str, SignalPart]:
    """The signals by role, the overrides of a run applied key by key; an empty override takes the signal away."""
    merged: dict[str, SignalPart] = {}
    for role in ROLES:
        base: SignalPart | None = getattr(shape, role)
        override: SignalPart | None = getattr(run.signals, role) if run is not None and run.signals else None
        if override is not None and not override.model_fields_set:
            continue
        if base is not None and override is not None:
            given = {name: getattr(override, name) for name in override.model_fields_set}
            if "source" in given:
                given.setdefault("sample_rate", None)
            merged[role] = base.model_copy(update=given)
        elif base is not None or override is not None:
            merged[role] = override or base  # type: ignore[assignment]
    return merged


def build_signals(
    key: str,
    parts: dict[str, SignalPart],
    rig_units: dict[str, str],
    quantities: Quantities,
    problems: Problems,
    *,
    logged: frozenset[str] = frozenset(ROLES),
) -> dict[str, Signal]:
    """Signals as values; ranges in the unit of the signal, or of the rig where the log states it.

    Those that no run logs need no source.
    """
    return {
        role: _build_signal(f"{key}.{role}", role, part, rig_units.get(role), quantities, problems, role in logged)
        for role, part in parts.items()
    }


def _build_signal(
    key: str,
    role: str,
    part: SignalPart,
    rig_unit: str | None,
    quantities: Quantities,
    problems: Problems,
    logged: bool,
) -> Signal:
    if (part.source is None) == (part.sample_rate is None) and (logged or part.source is not None):
        problems.add(
            key,
            "needs a source" + (" or a sample_rate, one of both" if role == "time" else ""),
            "both" if part.source is not None else "neither",
            'such as { source = "column name" }',
        )
    if part.sample_rate is not None and role != "time":
        problems.add(f"{key}.sample_rate", "only the time can be made from a sample rate")
    if part.scale == 0.0:
        problems.add(f"{key}.scale", "a scale of zero wipes the signal out", "0", "any other number")
    signal = Signal(part.source, part.unit, scale=part.scale, offset=part.offset, lost_as=tuple(part.lost_as))
    if part.sample_rate is not None and role == "time":
        signal = replace(signal, sample_rate=quantities.positive(f"{key}.sample_rate", part.sample_rate, "Hz"))
    unit = part.unit or rig_unit
    if part.range is None or unit is None or not units.is_known(unit):
        return signal
    ends = {
        end: quantities.reading(f"{key}.range.{end}", text, unit)
        for end in ("lowest", "highest")
        if (text := getattr(part.range, end)) is not None
    }
    require_order(f"{key}.range", ends.get("lowest"), ends.get("highest"), problems)
    return replace(signal, lowest=ends.get("lowest"), highest=ends.get("highest"))


def require_order(key: str, lowest: float | None, highest: float | None, problems: Problems) -> None:
    """Note it when the lowest value isn't below the highest."""
    if lowest is not None and highest is not None and lowest >= highest:
        problems.add(key, "lowest must be below highest", f"lowest {lowest:g}, highest {highest:g}")


def build_runs(
    runs: list[RunPart],
    files: list[list[Path]],
    folder: Path,
    rig_file: RigFile,
    rig_units: dict[str, str],
    problems: Problems,
    controller_interval: float | None = None,
) -> tuple[RunSpec, ...]:
    """Every run to read, in the order of the file."""
    quantities, shape = Quantities(problems), rig_file.signals
    usual = rig_file.controller.current
    common = build_in_force("controller.current", usual, controller_interval, rig_units, problems) if usual else None
    specs: list[RunSpec] = []
    windows: dict[Path, list[tuple[Window, str]]] = {}
    for number, (run, found) in enumerate(zip(runs, files, strict=True), 1):
        key = f"runs[{number}]"
        if is_table(run):
            columns, whole = table_signals(number, run, problems), (-math.inf, math.inf)
            specs += [_spec(run, file, folder, columns, None, whole) for file in found]
            continue
        window = _window(key, run, quantities, problems)
        signals = build_signals(
            f"{key}.signals" if run.signals else "signals",
            signals_of(shape, run),
            rig_units,
            quantities,
            problems if run.signals else Problems(""),
        )
        own = run.current
        in_force = build_in_force(f"{key}.current", own, controller_interval, rig_units, problems) if own else common
        require_known_command(number, run, rig_file, signals, in_force, problems)
        before = None
        if run.before is not None:
            before = quantities.reading(f"{key}.before.command", run.before.command, rig_units["command"])
        for file in found:
            _refuse_overlap(key, file, window, windows, problems)
            specs.append(replace(_spec(run, file, folder, signals, before, window), in_force=in_force))
    return tuple(specs)


def _spec(
    run: RunPart, file: Path, folder: Path, signals: dict[str, Signal], before: float | None, window: Window
) -> RunSpec:
    shown = str(file.relative_to(folder)) if file.is_relative_to(folder) else str(file)
    return RunSpec(
        file=file,
        shown=shown,
        use=run.use,
        loop=run.loop,
        excitation=run.excitation,
        between_samples=run.between_samples,
        signals=signals,
        from_s=window[0] if run.from_ is not None else None,
        to_s=window[1] if run.to is not None else None,
        command_before=before,
        group=run.group,
        taken=run.taken,
    )


def _window(key: str, run: RunPart, quantities: Quantities, problems: Problems) -> Window:
    start = -math.inf if run.from_ is None else quantities.difference(f"{key}.from", run.from_, "s", least=0.0)
    end = math.inf if run.to is None else quantities.difference(f"{key}.to", run.to, "s", least=0.0)
    if start >= end:
        problems.add(
            f"{key}.to",
            "the window ends before it begins",
            f'from "{run.from_ or "0 s"}" to "{run.to}"',
            "to later than from",
        )
    return start, end


def _refuse_overlap(
    key: str, file: Path, window: Window, seen: dict[Path, list[tuple[Window, str]]], problems: Problems
) -> None:
    for other, other_key in seen.setdefault(file, []):
        if window[0] < other[1] and other[0] < window[1]:
            problems.add(
                key,
                f"this window of {file.name} overlaps with {other_key}",
                _span(window),
                f"a window that doesn't touch {_span(other)}",
            )
    seen[file].append((window, key))


def _span(window: Window) -> str:
    start = "the start" if window[0] == -math.inf else f"{window[0]:g} s"
    end = "the end" if window[1] == math.inf else f"{window[1]:g} s"
    return f"{start} to {end}"
