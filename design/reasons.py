"""Why the gains can't be released, in words an engineer can act on."""

import numpy as np

from ..ident.plant import Plant
from .designed import Judged, LimitJudged
from .judge import PlantVerdicts
from .requirements import Requirement
from .sampled.bank import build_bank
from .situation import Situation
from .slack import meets, requirement_slack

_WORDS = {
    "overshoot": "overshoot",
    "settling_time": "settling time",
    "rise_time": "rise time",
    "steady_state_error": "steady-state error",
    "ramp_error": "ramp error",
    "disturbance_peak": "peak after a disturbance",
    "disturbance_recovery": "recovery after a disturbance",
    "command_noise": "noise of the command",
    "damping_ratio": "damping ratio",
    "gain_margin": "gain margin",
    "phase_margin": "phase margin",
    "peak_sensitivity": "peak sensitivity",
}
_TOGETHER = 0.04  # slacks this close to the smallest pull against each other


def shown(item: Requirement, value: float | None) -> str:
    """A value of a requirement in the unit the person wrote."""
    if value is None or not np.isfinite(value):
        return "never reached"
    return f"{value * item.scale:.3g} {item.unit}".strip()


def words(name: str) -> str:
    """The requirement's name as people say it."""
    return _WORDS.get(name, name)


def impossible(plant: Plant, situation: Situation, units: tuple[str, str]) -> list[str]:
    """What no controller whatever could meet, from the fitted plant alone."""
    found: list[str] = []
    setting = situation.setting
    delay = plant.dead_time + setting.computation_delay
    for item in situation.requirements.items:
        if item.name in ("settling_time", "disturbance_recovery") and item.limit <= delay:
            found.append(
                f"{words(item.name)} {shown(item, item.limit)} is asked, but the dead time alone is {delay:.3g} s: "
                "ask for more time, or shorten the dead time"
            )
        if item.name == "disturbance_peak" and item.command_step:
            least = _before_any_action(plant, situation, item.command_step)
            if least > item.limit:
                found.append(
                    f"a disturbance of {item.command_step:.3g} {units[0]} moves the response by "
                    f"{least:.3g} {units[1]} before any controller can act on it; {shown(item, item.limit)} is asked"
                )
    return found + _out_of_reach(plant, situation, units)


def _before_any_action(plant: Plant, situation: Situation, size: float) -> float:
    """Open-loop response one total delay after the disturbance is first seen."""
    setting = situation.setting
    wait = max(plant.dead_time + setting.computation_delay, 1e-9)
    bank = build_bank([Plant(plant.numerator, plant.denominator, 0.0)], wait, points=1)
    return float(abs(bank.step[0, -1, 0] * size))


def _out_of_reach(plant: Plant, situation: Situation, units: tuple[str, str]) -> list[str]:
    found = []
    goal = situation.start + situation.step
    limits = situation.limits
    if situation.step and not plant.integrators and plant.static_gain:
        needed = situation.operating_command + goal / plant.static_gain
        for bound, over, word in (
            (limits.command_highest, 1.0, "highest"),
            (limits.command_lowest, -1.0, "lowest"),
        ):
            if bound is not None and over * (needed - bound) > 0.0:
                found.append(
                    f"the test step needs {needed:.4g} {units[0]} to be held, the {word} command is "
                    f"{bound:.4g} {units[0]}: make the step smaller or widen the limit"
                )
    reached = situation.operating_response + goal
    for bound, over, word in ((limits.response_highest, 1.0, "highest"), (limits.response_lowest, -1.0, "lowest")):
        if situation.step and bound is not None and over * (reached - bound) > 0.0:
            found.append(
                f"the test step ends at {reached:.4g} {units[1]}, beyond the {word} response {bound:.4g} {units[1]}"
            )
    return found


def reasons_of(
    verdicts: PlantVerdicts,
    judged: tuple[Judged, ...],
    limits: tuple[LimitJudged, ...],
    slacks: dict[str, float],
    situation: Situation,
) -> list[str]:
    """What failed on the plants that were checked; empty when nothing did."""
    found: list[str] = []
    count = verdicts.stable.size
    if not verdicts.stable.all():
        found.append(f"{count - int(verdicts.stable.sum())} of {count} plausible plants are unstable with these gains")
    found += [
        f"{limit.name}: the worst plausible plant reaches {limit.predicted_worst:.4g} {limit.unit}, "
        f"the limit is {limit.limit:.4g} {limit.unit}"
        for limit in limits
        if not limit.met
    ]
    confidence = situation.requirements.confidence
    if verdicts.share_meeting < confidence:
        found.append(
            f"{100 * verdicts.share_meeting:.1f} % of the plausible plants meet everything together, "
            f"{100 * confidence:.0f} % is asked"
        )
        found += _failing(verdicts, judged)
        found += _conflict(slacks)
        found += _would_do(verdicts, situation)
    return found


def _failing(verdicts: PlantVerdicts, judged: tuple[Judged, ...]) -> list[str]:
    lines = []
    for entry in judged:
        if entry.met:
            continue
        item = entry.requirement
        bad = entry.high if item.sense == "at_most" else entry.low
        share = 100.0 * float(np.mean(verdicts.met(item)))
        floor = " (a floor that always holds)" if entry.floor else ""
        lines.append(
            f"{words(item.name)}{floor}: {shown(item, item.limit)} is asked; with the best gains found it is "
            f"{shown(item, entry.predicted)} on the fitted plant and, at worst, {shown(item, bad)} within 95 % of the "
            f"plausible ones; {share:.0f} % of them meet it"
        )
    return lines


def _conflict(slacks: dict[str, float]) -> list[str]:
    if len(slacks) < 2:
        return []
    least = min(slacks.values())
    tight = [words(name) for name, slack in slacks.items() if slack <= least + _TOGETHER]
    if len(tight) < 2:
        return []
    return [f"{tight[0]} and {tight[1]} pull against each other: to ease one of them would free the other"]


def _would_do(verdicts: PlantVerdicts, situation: Situation) -> list[str]:
    """By how much bounds would have to give for these gains to hold on the asked share of the plants, all together."""
    count = verdicts.stable.size
    slacks = np.array(
        [requirement_slack(item, verdicts.values.get(item.name, np.full(count, np.nan))) for item in verdicts.items]
    )
    if not slacks.size or not verdicts.stable.all():
        return []
    needed = int(np.ceil(count * situation.requirements.confidence - 1e-9))
    kept = np.argsort(-slacks.min(axis=0), kind="stable")[:needed]
    parts = []
    for item in verdicts.items:
        values = verdicts.values.get(item.name, np.full(count, np.inf))[kept]
        reached = float(values.max() if item.sense == "at_most" else values.min())
        if not np.isfinite(reached):
            return []
        if not meets(item, np.array([reached]))[0]:
            sense = "at most" if item.sense == "at_most" else "at least"
            outward = reached * (1.005 if (item.sense == "at_most") == (reached > 0.0) else 0.995)
            parts.append(f"{words(item.name)} {sense} {shown(item, outward)} in place of {shown(item, item.limit)}")
    return [f"what would have to give for the best gains found: {'; '.join(parts)}"] if parts else []
