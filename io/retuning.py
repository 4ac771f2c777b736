"""The job after a mechanical change: what changed, whether the old gains still do, and new gains from the old ones."""

from collections.abc import Sequence
from dataclasses import replace

from threadpoolctl import threadpool_limits

from ..design.ladder.build import build_ladder
from ..design.old_gains import judge_old_gains
from ..ident.catalogue import CATALOGUE, Structure
from ..ident.change import Changed, changes, known_of
from ..ident.errors import RequestError
from ..ident.fitted import Fit
from ..ident.identify import identify
from .earlier import Earlier
from .outcome import Outcome
from .parameter_unit import unit_of
from .progress import Progress, silent
from .retuned import Retuned


def retuned(outcome: Outcome, earlier: Earlier, progress: Progress = silent) -> Outcome:
    """A finished job held beside an earlier sheet.

    Parameters
    ----------
    outcome : Outcome
        Of the new records.
    earlier : Earlier

    Raises
    ------
    RequestError
        The earlier sheet is of other signals (units).
    """
    fit, rig = outcome.fit, outcome.rig
    _require_same_units(outcome, earlier)
    if fit is None:
        return outcome
    with threadpool_limits(limits=1):
        progress("looking for what has changed")
        alike = _like(outcome, fit, earlier)
        changed = _with_units(changes(earlier.known, known_of(alike)), alike, outcome)
        progress("holding the old gains against the new plant")
        old = judge_old_gains(
            earlier.gains,
            fit.plant,
            fit.plausible,
            operating_command=fit.operating_command,
            operating_response=fit.operating_response,
            noise=fit.noise,
            requirements=rig.requirements,
            limits=rig.limits,
            setting=rig.setting,
            law=earlier.law,
        )
        found = Retuned(earlier, changed, old, alike.structure)
        progress("building the gain ladder from the old gains")
        outcome = _climbing(outcome, fit, earlier)
    trail = {**outcome.provenance, "replaces": earlier.trail}
    return replace(outcome, retuned=found, provenance=trail, cautions=(*_cautions(found, fit), *outcome.cautions))


def _require_same_units(outcome: Outcome, earlier: Earlier) -> None:
    plant, rig = earlier.sheet["plant"], outcome.rig
    before = (plant["command_unit"], plant["response_unit"])
    if before != (rig.command_unit, rig.response_unit):
        raise RequestError(
            "the earlier sheet is in other units than the new records",
            where=str(earlier.file),
            found=f"command in {before[0]}, response in {before[1]}",
            expected=f"command in {rig.command_unit}, response in {rig.response_unit}",
            advice="state the units of the earlier sheet in the rig file, or process the new records by themselves",
        )


def _like(outcome: Outcome, fit: Fit, earlier: Earlier) -> Fit:
    """The new records fitted with the structure of the earlier sheet, so that like is compared with like."""
    family = family_of(earlier.known.structure)
    if fit.structure == earlier.known.structure or not family:
        return fit
    runs = [record.run for record in outcome.records if record.spec.use == "fit"]
    tables = [source.table for source in outcome.tables if source.spec.use == "fit"]
    if not runs and not tables:
        return fit
    rig = outcome.rig
    point = (rig.operating_command, rig.operating_response)
    command, response = point if runs else (fit.operating_command, fit.operating_response)
    return identify(
        runs, tables=tables, operating_command=command, operating_response=response, structures=family
    )


def family_of(name: str) -> Sequence[Structure]:
    """The structure of that name in the catalogue, with those of the same formula; empty where there is none."""
    named = [structure for structure in CATALOGUE if structure.name == name]
    return [each for each in CATALOGUE if named and each.polynomials is named[0].polynomials
            and each.friction == named[0].friction]  # fmt: skip


def _with_units(changed: Changed, fit: Fit, outcome: Outcome) -> Changed:
    rig = outcome.rig
    parameters = {each.name: each for each in fit.parameters}
    rows = tuple(
        replace(row, unit=unit_of(parameters[row.name], fit.plant.integrators, rig.command_unit, rig.response_unit))
        for row in changed.parameters
    )
    return replace(changed, parameters=rows)


def _climbing(outcome: Outcome, fit: Fit, earlier: Earlier) -> Outcome:
    """A ladder from the old gains, where they hold on the new plant; else the one from nothing stays."""
    if outcome.design is None or outcome.ladder is None or outcome.ladder.refusal:
        return outcome
    rig = outcome.rig
    ladder = build_ladder(
        outcome.design.gains,
        fit.plant,
        fit.plausible,
        operating_command=fit.operating_command,
        operating_response=fit.operating_response,
        noise=fit.noise,
        requirements=rig.requirements,
        limits=rig.limits,
        setting=rig.setting,
        old=earlier.gains,
    )
    return replace(outcome, ladder=ladder)


def _cautions(found: Retuned, fit: Fit) -> tuple[str, ...]:
    said = []
    if not found.earlier.released:
        said.append("the earlier sheet was held: its gains stand in for the old ones as a candidate only")
    if fit.structure != found.earlier.known.structure:
        said.append(
            f"the plant's structure changed from {found.earlier.known.structure} to {fit.structure}; parameters were "
            f"compared as {found.structure}"
        )
    return tuple(said)
