"""Which structures are worth a search, simplest first, and why the others are not."""

from dataclasses import dataclass

from ...ident.plant import Plant
from ..designed import Tried
from ..requirements import StructureName
from ..situation import Situation

ORDER: tuple[StructureName, ...] = ("P", "I", "PI", "PD", "PID", "lead", "lag", "lead-lag")
LAST: tuple[StructureName, ...] = ("lead", "lag", "lead-lag")
_USUAL: tuple[StructureName, ...] = ("P", "I", "PI", "PD", "PID")
SKIPPED = float("-inf")


@dataclass(frozen=True)
class Plan:
    """Structures to search in this order, rows for those that are not, and those to fall back on where none holds."""

    structures: tuple[StructureName, ...]
    skipped: tuple[Tried, ...]
    last: tuple[StructureName, ...] = ()


def plan_for(plant: Plant, situation: Situation) -> Plan:
    """Drop what cannot work in principle."""
    allowed = situation.setting.structures or (_USUAL if situation.requirements.items else ("P",))
    known = [name for name in ORDER if name in allowed]
    rows: list[Tried] = []
    kept: list[StructureName] = []
    for name in known:
        why = _hopeless(name, plant, situation)
        if why:
            rows.append(Tried(name, SKIPPED, 0.0, f"not tried: {why}"))
        else:
            kept.append(name)
    free = situation.setting.structures is None and bool(situation.requirements.items)
    last = tuple(name for name in LAST if not _hopeless(name, plant, situation)) if free else ()
    return Plan(tuple(kept) if kept else tuple(known[-1:]), tuple(rows), last)


def _hopeless(name: StructureName, plant: Plant, situation: Situation) -> str:
    ramp = situation.requirements.find("ramp_error")
    integrators = plant.integrators + int(name in ("I", "PI", "PID"))
    if ramp is not None and integrators < 1:
        return "without an integral the ramp error grows without end"
    if name == "I" and plant.integrators:
        return "an integral alone around an integrating plant is unstable at every gain"
    if name in ("P", "PD", "lead", "lag", "lead-lag") and not plant.integrators and _offset_unasked(situation):
        return "it leaves a steady offset, and no steady-state error was stated that would allow one"
    return ""


def _offset_unasked(situation: Situation) -> bool:
    asked = situation.requirements
    return situation.setting.structures is None and bool(asked.items) and asked.find("steady_state_error") is None
