"""Released or held: every condition of a release, each with its reason when it fails."""

import math
from collections.abc import Iterator, Sequence

from ..design.closing.compared import Compared
from ..design.designed import Design, Judged, LimitJudged
from ..design.ladder.rung import Ladder
from ..design.requirements import RequirementName
from .record import Record, Source
from .rigfile.rig import Rig

FEWEST_PLANTS = 1000
MARGINS: tuple[RequirementName, ...] = ("gain_margin", "phase_margin", "peak_sensitivity")


def reasons_to_hold(
    rig: Rig,
    records: Sequence[Source],
    design: Design | None,
    closing: Sequence[Compared],
    twins: Sequence[tuple[Record, Record]] = (),
    ladder: Ladder | None = None,
) -> tuple[str, ...]:
    """Why the gains are not released, one sentence a failing condition; empty when all conditions are met.

    Released means checked by calculation: the person responsible for the rig still approves.

    Parameters
    ----------
    rig : Rig
    records : sequence of Source
        Fitted and held-out ones.
    design : Design or None
        None: no gains were found to judge.
    closing : sequence of Compared, one a held-out record
    twins : sequence of (held-out record, fitted record)
        Pairs that share samples.
    ladder : Ladder or None
        One that was refused holds the gains: less gain is not safer there.
    """
    reasons = [
        *_from_rig_file(rig),
        *_from_records(records),
        *(_twin_text(held_out, fitted) for held_out, fitted in twins),
        *_from_closing(closing, [held_out.run.label for held_out, _ in twins]),
        *(_from_design(design, rig) if design else ["no controller was found that could be judged"]),
        *([ladder.refusal] if ladder and ladder.less_is_unsafe else []),
    ]
    return tuple(dict.fromkeys(reasons))


def _from_rig_file(rig: Rig) -> Iterator[str]:
    for key in rig.guessed:
        yield f"the rig file's {key} is still marked `guessed = true`: confirm the value and remove the mark"
    limits = rig.limits
    for name, unit, low, high in (
        ("command", rig.command_unit, limits.command_lowest, limits.command_highest),
        ("response", rig.response_unit, limits.response_lowest, limits.response_highest),
    ):
        missing = [key for key, value in (("lowest", low), ("highest", high)) if value is None]
        if missing:
            yield (
                f"[limits] {name} has no {' and no '.join(missing)}: give the hardware's value in {unit}, "
                'or "not limited" where nothing can be harmed'
            )


def _from_records(records: Sequence[Source]) -> Iterator[str]:
    for record in records:
        for finding in record.findings:
            if finding.refuses == "holds":
                yield f"{record.spec.shown}: {finding.text}"


def _twin_text(held_out: Record, fitted: Record) -> str:
    return (
        f"held-out {held_out.spec.shown} holds samples that were fitted as {fitted.spec.shown}: "
        "record a fresh run and hold that one out"
    )


def _from_closing(closing: Sequence[Compared], not_fresh: Sequence[str]) -> Iterator[str]:
    if not closing:
        yield 'no held-out run: record a fresh one that is not fitted and add it with use = "held-out"'
        return
    for compared in closing:
        if compared.verdict == "disagrees":
            yield f"held-out {compared.label} disagrees with the prediction: {compared.why}"
    if not any(compared.verdict == "agrees" for compared in closing):
        for compared in closing:
            if compared.verdict == "not comparable" and compared.label not in not_fresh:
                yield f"held-out {compared.label} can't be compared with the prediction: {compared.why}"


def _from_design(design: Design, rig: Rig) -> Iterator[str]:
    """The design's own reasons; where it has none, every condition is looked at once more."""
    yield from design.reasons
    if design.plants_checked < FEWEST_PLANTS:
        yield f"only {design.plants_checked} plausible plants were checked, fewer than {FEWEST_PLANTS}"
    if not design.reasons:
        yield from _unsaid(design, rig)


def _unsaid(design: Design, rig: Rig) -> Iterator[str]:
    if not design.all_stable:
        yield "the loop is unstable on at least one plausible plant: lower the demands, or record a longer fit run"
    yield from _from_limits(design)
    confidence = rig.requirements.confidence
    if design.share_meeting < confidence:
        yield _share_text(design, confidence)
    for judged in design.judged:
        if judged.floor and not judged.met:
            yield _floor_text(judged)
    yield from _missing_floors(design, rig)


def _from_limits(design: Design) -> Iterator[str]:
    passed = [limit for limit in design.limits if not limit.met and limit.name.startswith("response")]
    for limit in passed:
        yield _limit_text(limit)
    if not design.limits_kept and not passed:
        yield "a limit of the response is passed on at least one plausible plant"


def _limit_text(limit: LimitJudged) -> str:
    return (
        f"the {limit.name} limit of {limit.limit:g} {limit.unit} is passed: {limit.predicted_worst:g} {limit.unit} "
        "on the worst plausible plant; take a smaller test step, or ask for a slower loop"
    )


def _share_text(design: Design, confidence: float) -> str:
    failing = [judged.requirement.name for judged in design.judged if not judged.met and not judged.floor]
    which = f"; not met at that share: {', '.join(failing)}" if failing else ""
    return (
        f"{100 * math.floor(1000 * design.share_meeting) / 1000:.1f} % of the plausible plants meet all requirements "
        f"together, and {100 * confidence:g} % are asked for{which}"
    )


def _floor_text(judged: Judged) -> str:
    requirement = judged.requirement
    unit = f" {requirement.unit}" if requirement.unit else ""
    found = "none" if judged.predicted is None else f"{judged.predicted * requirement.scale:.3g}{unit}"
    return (
        f"the floor for {requirement.name.replace('_', ' ')} is missed: {found} for the fitted plant, and "
        f"{requirement.sense.replace('_', ' ')} {requirement.limit * requirement.scale:g}{unit} holds where no margin "
        "is asked for (common practice, no source)"
    )


def _missing_floors(design: Design, rig: Rig) -> Iterator[str]:
    if any(rig.requirements.find(name) for name in MARGINS):
        return
    judged = {each.requirement.name for each in design.judged}
    for name in MARGINS:
        if name not in judged:
            yield f"the floor for {name.replace('_', ' ')} was not judged"
