"""Read a rig file: shape first, then runs and units, then every quantity in the units of the signals."""

import hashlib
import re
import tomllib
from pathlib import Path
from typing import Any

from ...ident.errors import RequestError
from . import given
from .messages import Problems, shape_problems
from .quantities import Quantities
from .rig import LogDialect, Rig
from .runs import build_runs, build_signals, find_files, logged_roles, signals_of
from .schema import Log, OperatingPoint, RigFile
from .signal_units import rig_units
from .table_runs import check_tables
from .wishes import Wishes

_SEPARATORS = {"comma": ",", "semicolon": ";", "tab": "\t", "space": " ", "pipe": "|"}


def load_rig(path: Path) -> Rig:
    """Read and check a rig file; logs are opened only to learn the units that the rig file leaves to them.

    Parameters
    ----------
    path : Path
        Of the rig file. Its name is never looked at.

    Returns
    -------
    Rig
        Every number in the units of the logged signals and in seconds.

    Raises
    ------
    RequestError
        For anything wrong in the rig file: file, key, found, expected and the nearest right word; all that can be said
        at once is said at once.
    RecordError
        When a log has to be opened to learn its units and can't be read.
    """
    content = _bytes(path)
    shape = _shape(path, _table(path, content))
    folder = path.resolve().parent
    problems = Problems(str(path))
    files = find_files(shape.runs, folder, problems)
    _require_a_plant(shape, problems)
    check_tables(shape, problems)
    sheet = given.read_sheet(shape, folder, problems)
    dialect = _dialect(shape.log, problems)
    problems.raise_any()
    if shape.plant is not None:
        shape = given.with_units(shape, sheet)
    units = rig_units(shape, files, dialect, problems)
    problems.raise_any()
    return _values(path, content, shape, files, dialect, units, sheet)


def _require_a_plant(shape: RigFile, problems: Problems) -> None:
    """Runs to fit or a given plant, one of both; and a controller that is sampled where there are logs to fit."""
    fitted = [number for number, run in enumerate(shape.runs, 1) if run.use == "fit"]
    if shape.plant is None:
        if not fitted:
            problems.add("runs", "no run is there to be fitted", f"{len(shape.runs)} runs", 'a run with use = "fit"')
        if "controller" not in shape.model_fields_set:
            problems.add("controller", "this key is missing", expected="a [controller] table with its update_interval")
        elif shape.controller.update_interval is None:
            problems.add("controller.update_interval", "this key is missing", expected='such as "5 ms"')
    elif fitted:
        problems.add(
            f"runs[{fitted[0]}].use",
            "there is a [plant] already, and nothing is fitted beside it",
            '"fit"',
            '"held-out", or no [plant]',
        )


def _values(
    path: Path,
    content: bytes,
    shape: RigFile,
    files: list[list[Path]],
    dialect: LogDialect,
    units: dict[str, str],
    sheet: dict[str, Any] | None = None,
) -> Rig:
    folder = path.resolve().parent
    problems = Problems(str(path))
    wishes = Wishes(problems, units["command"], units["response"])
    parts = signals_of(shape.signals)
    signals = build_signals("signals", parts, units, Quantities(problems), problems, logged=logged_roles(shape))
    limits = wishes.limits(shape.limits)
    requirements = wishes.requirements(shape.requirements, limits)
    setting = wishes.setting(shape.controller)
    interval = None if setting.continuous else setting.update_interval
    runs = build_runs(shape.runs, files, folder, shape, units, problems, interval)
    operating = _operating_point(shape.operating_point, units, problems)
    plant = given.build_given(shape.plant, sheet, units, problems) if shape.plant is not None else None
    if plant is not None:
        earlier = given.operating_point(sheet, units)
        command, response = operating
        operating = (
            earlier.get("command") if command is None else command,
            earlier.get("response") if response is None else response,
        )
    problems.raise_any()
    return Rig(
        name=shape.rig.name,
        file=path.resolve(),
        sha256=hashlib.sha256(content).hexdigest(),
        command_unit=units["command"],
        response_unit=units["response"],
        signals=signals,
        runs=runs,
        dialect=dialect,
        setting=setting,
        requirements=requirements,
        limits=limits,
        operating_command=operating[0],
        operating_response=operating[1],
        guessed=tuple(_guessed(shape)),
        given=plant,
    )


def _bytes(path: Path) -> bytes:
    try:
        return path.read_bytes()
    except OSError as problem:
        raise RequestError(
            "the rig file can't be read",
            where=str(path),
            found=problem.strerror or str(problem),
            advice="give the path of a rig file (TOML)",
        ) from problem


def _table(path: Path, content: bytes) -> dict[str, Any]:
    try:
        return tomllib.loads(content.decode("utf-8-sig").replace("\r\n", "\n"))
    except UnicodeDecodeError as problem:
        line = content[: problem.start].count(b"\n") + 1
        raise RequestError(
            "the rig file is not UTF-8",
            where=f"{path}, line {line}",
            found=repr(content[problem.start : problem.end]),
            expected="text in UTF-8",
            advice="save it as UTF-8",
        ) from problem
    except tomllib.TOMLDecodeError as problem:
        place = re.search(r"\(at line (\d+), column (\d+)\)", str(problem))
        where = f"{path}, line {place[1]}, column {place[2]}" if place else f"{path}, at its end"
        raise RequestError(
            "the rig file is not TOML",
            where=where,
            found=re.sub(r" \(at .*\)", "", str(problem)),
            expected='lines such as key = "value"',
        ) from problem
    except (RecursionError, ValueError) as problem:  # a whole number of thousands of digits is a bare ValueError
        deep = isinstance(problem, RecursionError)
        raise RequestError(
            "the rig file is nested too deep" if deep else "a number in the rig file can't be read",
            where=str(path),
            found="tables or lists hundreds deep" if deep else str(problem).split(";")[0],
            expected='lines such as key = "value"',
        ) from problem


def _shape(path: Path, table: dict[str, Any]) -> RigFile:
    from pydantic import ValidationError

    problems = Problems(str(path))
    try:
        return RigFile.model_validate(table)
    except ValidationError as problem:
        problems.extend(shape_problems(problem.errors(), RigFile))
        problems.raise_any()
        raise


def _dialect(part: Log, problems: Problems) -> LogDialect:
    separator = _SEPARATORS.get(part.separator, part.separator) if part.separator is not None else None
    if separator is not None and len(separator) != 1:
        problems.add("log.separator", "the separator is one sign", f'"{separator}"', '";", ",", "\\t", " " or "|"')
    if separator is not None and separator == part.decimal:
        problems.add("log.decimal", "separator and decimal sign are the same", f'"{separator}"', "two different signs")
    if part.encoding is not None:
        try:
            "0".encode(part.encoding)
        except (LookupError, ValueError):  # no codec of that name, none of texts, or one that can't even write a digit
            problems.add("log.encoding", "unknown encoding", f'"{part.encoding}"', '"utf-8", "utf-16" or "cp1252"')
    return LogDialect(separator, part.decimal, part.encoding, part.header_row, part.first_row, tuple(part.not_a_number))


def _operating_point(
    part: OperatingPoint, units: dict[str, str], problems: Problems
) -> tuple[float | None, float | None]:
    quantities = Quantities(problems)
    command = response = None
    if part.command is not None:
        command = quantities.reading("operating_point.command", part.command, units["command"])
    if part.response is not None:
        response = quantities.reading("operating_point.response", part.response, units["response"])
    return command, response


def _guessed(part: Any, key: str = "") -> list[str]:
    """Keys of the tables that are marked `guessed = true`."""
    found = [key or "the whole file"] if getattr(part, "guessed", False) else []
    for name in getattr(part, "model_fields_set", ()):
        value = getattr(part, name)
        inner = f"{key}.{name}" if key else name
        if isinstance(value, list):
            for number, item in enumerate(value, 1):
                found += _guessed(item, f"{inner}[{number}]")
        else:
            found += _guessed(value, inner)
    return sorted(found)
