"""[plant]: a plant that stands in the rig file, or in an earlier gain sheet, instead of fit runs."""

import json
import math
from pathlib import Path
from typing import Any

from ...ident.errors import RequestError
from ...ident.given import STRUCTURE, GivenPlant, Tolerance
from ...ident.plant import Plant
from .. import units
from .messages import Problems
from .quantities import Quantities
from .schema import PlantPart, RigFile

_KEY = "plant"


def read_sheet(shape: RigFile, folder: Path, problems: Problems) -> dict[str, Any] | None:
    """The gain sheet that [plant] names, as far as its plant goes; None where it names none."""
    part = shape.plant
    if part is None or part.sheet is None:
        return None
    return problems.attempt(f"{_KEY}.sheet", lambda: _sheet(folder / part.sheet), None)  # type: ignore[operator]


def _sheet(path: Path) -> dict[str, Any]:
    try:
        content = json.loads(path.read_text("utf-8"))
    except OSError as problem:
        raise RequestError(
            "no such gain sheet", found=f'"{path}"', expected="a gains.json of an earlier job"
        ) from problem
    except (ValueError, RecursionError) as problem:
        raise RequestError("this is no gain sheet", found=f'"{path}": {problem}', expected="JSON") from problem
    sheet: dict[str, Any] = content if isinstance(content, dict) else {}
    plant = sheet.get("plant")
    if not isinstance(plant, dict) or not all(key in plant for key in ("numerator", "denominator", "dead_time")):
        raise RequestError("this sheet holds no plant", found=f'"{path}"', expected="a sheet with `plant` filled in")
    return sheet


def with_units(shape: RigFile, sheet: dict[str, Any] | None) -> RigFile:
    """The shape with the units of command and response that [signals] leaves open: the sheet's, else pure numbers."""
    signals = shape.signals
    found = sheet["plant"] if sheet else {}
    parts = {}
    for role in ("command", "response"):
        part = getattr(signals, role)
        if part.unit is None and (part.source is None or not shape.runs):
            part = part.model_copy(update={"unit": str(found.get(f"{role}_unit", "1"))})
        parts[role] = part
    return shape.model_copy(update={"signals": signals.model_copy(update=parts)})


def build_given(
    part: PlantPart, sheet: dict[str, Any] | None, signal_units: dict[str, str], problems: Problems
) -> GivenPlant | None:
    """The plant with its tolerance; None when something is wrong with it, which is then noted."""
    quantities = Quantities(problems)
    tolerance = Tolerance(
        *(
            quantities.fraction(f"{_KEY}.tolerance.{name}", getattr(part.tolerance, name), most=0.9)
            for name in ("gain", "dead_time", "poles")
        )
    )
    stated = [name for name in ("numerator", "denominator", "dead_time") if getattr(part, name) is not None]
    if part.sheet is not None:
        if stated:
            problems.add(_KEY, "the plant is given twice", f"sheet and {', '.join(stated)}", "one of both")
        return None if sheet is None or stated else _from_sheet(part.sheet, sheet, tolerance, signal_units, problems)
    for name in ("numerator", "denominator"):
        if name not in stated:
            problems.add(f"{_KEY}.{name}", "this key is missing", expected="coefficients in s, highest power first")
    if part.numerator is None or part.denominator is None:
        return None
    dead_time = 0.0
    if part.dead_time is not None:
        dead_time = quantities.difference(f"{_KEY}.dead_time", part.dead_time, "s", least=0.0)
    plant = _checked(part.numerator, part.denominator, dead_time, problems)
    return None if plant is None else GivenPlant(plant, tolerance)


def _checked(above: list[float], below: list[float], dead_time: float, problems: Problems) -> Plant | None:
    """A plant that a controller can be closed round."""
    top, bottom = _stripped(above), _stripped(below)
    if not top or not bottom:
        key = "numerator" if not top else "denominator"
        problems.add(f"{_KEY}.{key}", "the polynomial is zero", str(above if not top else below), "a coefficient")
        return None
    if len(top) > len(bottom):
        problems.add(
            _KEY,
            "the numerator is of higher degree than the denominator",
            f"degrees {len(top) - 1} and {len(bottom) - 1}",
            "a plant that can be built",
        )
        return None
    if top[-1] == 0.0:
        what = "a plant with a zero at the origin has no steady response to control"
        problems.add(f"{_KEY}.numerator", what, str(above), "a last coefficient other than zero")
        return None
    if len(bottom) == 1:
        problems.add(_KEY, "a plant without any pole has no locus", str(below), "a denominator of degree one or more")
        return None
    if not math.isfinite(dead_time):
        return None
    return Plant(top, bottom, dead_time)


def _stripped(coefficients: list[float]) -> tuple[float, ...]:
    first = next((place for place, c in enumerate(coefficients) if c != 0.0), len(coefficients))
    return tuple(float(c) for c in coefficients[first:])


def _from_sheet(
    name: str, sheet: dict[str, Any], tolerance: Tolerance, signal_units: dict[str, str], problems: Problems
) -> GivenPlant | None:
    found = sheet["plant"]

    def factor(role: str) -> float:
        unit = str(found.get(f"{role}_unit") or signal_units[role])
        return units.difference_factor(unit, signal_units[role])

    per = problems.attempt(f"{_KEY}.sheet", lambda: factor("response") / factor("command"), math.nan)
    try:
        above = [float(c) * per for c in found["numerator"]]
        below, dead_time = [float(c) for c in found["denominator"]], float(found["dead_time"])
        friction = _friction(found)
    except (TypeError, ValueError, LookupError, AttributeError, OverflowError) as problem:
        found_there = f"{type(problem).__name__}: {problem}"
        problems.add(f"{_KEY}.sheet", "the sheet's plant is damaged", found_there, "finite numbers")
        return None
    if math.isnan(per):
        return None  # noted already
    if not all(math.isfinite(c) for c in (*above, *below, dead_time, friction)) or dead_time < 0.0:
        found_there = f"numerator {above}, denominator {below}, dead time {dead_time:g} s"
        problems.add(f"{_KEY}.sheet", "the sheet's plant is damaged", found_there, "finite numbers, no time below zero")
        return None
    plant = _checked(above, below, dead_time, problems)
    if plant is None:
        return None
    words = f"gain sheet {name}, {sheet.get('status', 'of unknown status')}"
    structure = str(found.get("structure") or STRUCTURE)
    return GivenPlant(plant, tolerance, words, structure, friction * factor("command"))


def _friction(found: dict[str, Any]) -> float:
    parameters = found.get("parameters") or {}
    values = [float(part["value"]) for key, part in parameters.items() if key.startswith("friction")]
    return max(values, default=0.0)


def operating_point(sheet: dict[str, Any] | None, signal_units: dict[str, str]) -> dict[str, float]:
    """Command and response of the sheet's operating point, in the units of the signals; empty without a sheet."""
    point = (sheet or {}).get("operating_point")
    found = {}
    for role in ("command", "response"):
        part = point.get(role) if isinstance(point, dict) else None
        value = part.get("value") if isinstance(part, dict) else None
        if isinstance(part, dict) and isinstance(value, int | float) and abs(value) < 1e300:
            unit = str(part.get("unit") or signal_units[role])
            found[role] = units.convert_reading(float(value), unit, signal_units[role])
    return found
