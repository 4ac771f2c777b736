"""What was asked for, as the sheet keeps it, so that a later check needs no rig file: base units and seconds."""

import math
from dataclasses import asdict, fields
from typing import Any

from ..design.requirements import ControllerSetting, Limits, Requirement, Requirements
from .rigfile.rig import Rig

_FREE = "not limited"


def asked_of(rig: Rig) -> dict[str, Any]:
    """Requirements, limits and controller setting; errors in response unit, times in s, fractions for per cent."""
    return {
        "requirements": _plain(asdict(rig.requirements)),
        "limits": _plain(asdict(rig.limits)),
        "setting": _plain(asdict(rig.setting)),
    }


def asked_again(asked: dict[str, Any]) -> tuple[Requirements, Limits, ControllerSetting]:
    """The same as values."""
    wishes = dict(asked["requirements"])
    items = tuple(Requirement(**_known(Requirement, each)) for each in wishes.pop("items"))
    requirements = Requirements(items=items, **_known(Requirements, wishes))
    limits = Limits(**{name: _bound(name, value) for name, value in _known(Limits, asked["limits"]).items()})
    setting = _known(ControllerSetting, asked["setting"])
    structures = setting.pop("structures", None)
    return requirements, limits, ControllerSetting(structures=tuple(structures) if structures else None, **setting)


def _plain(value: Any) -> Any:
    """JSON values; what was said to be not limited in words, because JSON knows no infinity."""
    if isinstance(value, dict):
        return {name: _plain(item) for name, item in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(item) for item in value]
    return _FREE if isinstance(value, float) and math.isinf(value) else value


def _bound(name: str, value: Any) -> float | None:
    if value == _FREE:
        return -math.inf if name.endswith("lowest") else math.inf
    return value if value is None else float(value)


def _known(kind: Any, given: dict[str, Any]) -> dict[str, Any]:
    """Only what this version knows: a later one may have written more."""
    names = {field.name for field in fields(kind)}
    return {name: value for name, value in given.items() if name in names}
