"""The whole job, and the only place where the stages meet: rig file in, values out, nothing written."""

from collections.abc import Callable, Sequence
from dataclasses import replace
from functools import partial
from pathlib import Path

from threadpoolctl import threadpool_limits

from ..design.aside import HERE, Aside, Pending
from ..design.closing.compared import Compared
from ..design.closing.given import compare_given
from ..design.closing.table import compare_table
from ..design.closing.verdict import begin_comparing, compare
from ..design.closing.words import Units
from ..design.design import SETS, Begun, begin_design
from ..design.designed import Design
from ..design.ladder.build import build_ladder
from ..design.ladder.rung import Ladder
from ..design.local_gain import with_local_gains
from ..ident.confront import Confronted
from ..ident.errors import RecordError
from ..ident.fitted import Fit
from ..ident.given import fit_of_given
from ..ident.identify import identify
from .cautions import cautions_for
from .outcome import Outcome
from .progress import Progress, silent
from .provenance import provenance_of
from .read_record import read_record, shares_samples
from .read_table import read_table
from .record import Record, Source, TableRecord
from .release import reasons_to_hold
from .rigfile.load import load_rig
from .rigfile.rig import Rig, RunSpec
from .rigfile.table_runs import KIND


def process_rig(
    rig_path: Path,
    progress: Progress = silent,
    change: Callable[[Rig], Rig] | None = None,
    aside: Aside = HERE,
) -> Outcome:
    """From a rig file to gains with a verdict: read, fit, design, close.

    Parameters
    ----------
    rig_path : Path
    progress : Progress
        Called with each stage in words.
    change : callable or None
        Makes the rig to process from the one that the rig file states: with a fresh run, for instance.
    aside : Aside
        Takes work that can be done meanwhile; the outcome is the same wherever it is done.

    Returns
    -------
    Outcome
        Released or held, with every value behind it; nothing has been written.

    Raises
    ------
    RequestError
        The rig file is wrong (exit code 2).
    RecordError
        A record can't be used (exit code 4).
    """
    with threadpool_limits(limits=1):  # small matrices: more threads only get into each other's way
        progress("reading the rig file")
        rig = load_rig(rig_path)
        rig = rig if change is None else change(rig)
        sources = _read_all(rig, progress)
        records = tuple(source for source in sources if isinstance(source, Record))
        tables = tuple(source for source in sources if isinstance(source, TableRecord))
        alone = _alone(rig, records, progress)
        fit = _fit(rig, records, tables, alone, progress)
        confronted = _begin_closing(records, fit, aside)
        begun = _design(rig, fit, progress, aside)
        rungs = _ladder(rig, fit, begun.design, aside)
        twins = _twins(records)
        closing = _close(rig, records, fit, begun.design, twins, progress, alone, confronted)
        closing += _close_tables(rig, tables, fit, begun.design, progress)
        progress("building the gain ladder")
        ladder = rungs.result()
        progress(SETS)
        design = begun.finished()
    reasons = reasons_to_hold(rig, (*records, *tables), design, closing, twins, ladder)
    return Outcome(
        rig=rig,
        records=records,
        fit=fit,
        design=design,
        closing=closing,
        status="held" if reasons else "released",
        reasons=reasons,
        cautions=_cautions(rig, (*records, *tables), fit, design, closing, ladder),
        provenance=provenance_of(rig, (*records, *tables)),
        ladder=ladder,
        tables=tables,
    )


def _read_all(rig: Rig, progress: Progress) -> tuple[Source, ...]:
    sources: list[Source] = []
    for place, spec in enumerate(rig.runs):
        progress(f"reading {spec.shown}", place / len(rig.runs))
        source = _read(spec, rig)
        for finding in source.findings:
            if finding.refuses == "stops":
                raise RecordError(
                    finding.kind,
                    where=spec.shown,
                    found=f"{finding.size}, {finding.where}",
                    expected="a record that can be used",
                    advice=finding.action,
                )
        sources.append(source)
    return tuple(sources)


def _read(spec: RunSpec, rig: Rig) -> Source:
    return read_table(spec, rig) if spec.excitation == KIND else read_record(spec, rig)


def _fit(
    rig: Rig,
    records: Sequence[Record],
    tables: Sequence[TableRecord],
    held_out: Sequence[Fit | None],
    progress: Progress,
) -> Fit:
    known = next((alone for alone in held_out if alone is not None), None)
    if rig.given is None:
        return _identify(rig, records, tables, known, progress)
    return fit_of_given(
        rig.given,
        operating_command=_first(rig.operating_command, known.operating_command if known else None),
        operating_response=_first(rig.operating_response, known.operating_response if known else None),
        noise=known.noise if known else None,
    )


def _first(*values: float | None) -> float:
    return next((value for value in values if value is not None), 0.0)


def _alone(rig: Rig, records: Sequence[Record], progress: Progress) -> tuple[Fit | None, ...]:
    """Beside a plant that no run in time gave each held-out record is fitted by itself: only it tells of noise and
    operating point."""
    if rig.given is None and any(record.spec.use == "fit" for record in records):
        return ()
    return tuple(_fitted_alone(rig, record, progress) for record in records if record.spec.use == "held-out")


def _fitted_alone(rig: Rig, record: Record, progress: Progress) -> Fit | None:
    progress(f"fitting {record.spec.shown} by itself")
    try:
        return identify([record.run], operating_command=rig.operating_command, progress=progress)
    except RecordError:
        return None  # the comparison says so


def _identify(
    rig: Rig, records: Sequence[Record], tables: Sequence[TableRecord], known: Fit | None, progress: Progress
) -> Fit:
    """Runs and tables to fit, jointly. Tables alone take operating point and noise from `known`, a run in time."""
    fitted = [record.run for record in records if record.spec.use == "fit"]
    command, response = rig.operating_command, rig.operating_response
    if known is not None and (command is None or response is None):
        command, response = known.operating_command, known.operating_response
    progress("fitting the plant")
    fit = identify(
        fitted,
        tables=[source.table for source in tables if source.spec.use == "fit"],
        operating_command=command,
        operating_response=response,
        progress=progress,
    )
    return with_local_gains(fit if known is None else replace(fit, noise=known.noise), rig.requirements)


def _design(rig: Rig, fit: Fit, progress: Progress, aside: Aside) -> Begun:
    progress("choosing gains")
    return begin_design(
        fit.plant,
        fit.plausible,
        operating_command=fit.operating_command,
        operating_response=fit.operating_response,
        noise=fit.noise if fit.noise.std > 0.0 or fit.runs else None,
        requirements=rig.requirements,
        limits=rig.limits,
        setting=rig.setting,
        command_unit=rig.command_unit,
        response_unit=rig.response_unit,
        progress=progress,
        aside=aside,
    )


def _ladder(rig: Rig, fit: Fit, design: Design, aside: Aside) -> Pending[Ladder | None]:
    """The way up from an open loop; gains that are not stable everywhere get none."""
    if not design.all_stable:
        return HERE.start(_none)
    work = partial(
        build_ladder,
        design.gains,
        fit.plant,
        fit.plausible,
        operating_command=fit.operating_command,
        operating_response=fit.operating_response,
        noise=fit.noise,
        requirements=rig.requirements,
        limits=rig.limits,
        setting=rig.setting,
    )
    return aside.start(work)


def _none() -> None:
    """No ladder."""


def _twins(records: Sequence[Record]) -> tuple[tuple[Record, Record], ...]:
    """Held-out records beside the fitted ones that hold the same samples, under whatever name."""
    held_out = [record for record in records if record.spec.use == "held-out"]
    fitted = [record for record in records if record.spec.use == "fit"]
    return tuple((mine, other) for mine in held_out for other in fitted if shares_samples(mine, other))


def _begin_closing(records: Sequence[Record], fit: Fit, aside: Aside) -> tuple[Pending[Confronted] | None, ...]:
    """What each held-out record says by itself; it needs no gains."""
    held_out = [record.run for record in records if record.spec.use == "held-out"]
    return tuple(begin_comparing(run, fit, aside) if fit.runs else None for run in held_out)


def _close(
    rig: Rig,
    records: Sequence[Record],
    fit: Fit,
    design: Design,
    twins: Sequence[tuple[Record, Record]],
    progress: Progress,
    alone: Sequence[Fit | None],
    confronted: Sequence[Pending[Confronted] | None],
) -> tuple[Compared, ...]:
    closing: list[Compared] = []
    for record in records:
        if record.spec.use != "held-out":
            continue
        progress(f"comparing with {record.spec.shown}")
        compared = (
            _compare(rig, record, fit, design, progress, confronted[len(closing)])
            if fit.runs
            else compare_given(
                record.run,
                fit,
                alone[len(closing)],
                design,
                requirements=rig.requirements,
                limits=rig.limits,
                setting=rig.setting,
            )
        )
        twin = next((fitted for held_out, fitted in twins if held_out is record), None)
        closing.append(compared if twin is None else _not_fresh(compared, twin))
    return tuple(closing)


def _close_tables(
    rig: Rig, tables: Sequence[TableRecord], fit: Fit, design: Design, progress: Progress
) -> tuple[Compared, ...]:
    closing = []
    fitted = [source for source in tables if source.spec.use == "fit"]
    for source in tables:
        if source.spec.use != "held-out":
            continue
        progress(f"comparing with {source.spec.shown}")
        compared = compare_table(
            source.table, fit, design, requirements=rig.requirements, limits=rig.limits, setting=rig.setting
        )
        twin = next((other for other in fitted if other.samples_sha256 == source.samples_sha256), None)
        closing.append(compared if twin is None else _not_fresh(compared, twin))
    return tuple(closing)


def _compare(
    rig: Rig, record: Record, fit: Fit, design: Design, progress: Progress, alone: Pending[Confronted] | None
) -> Compared:
    return compare(
        record.run,
        fit,
        design,
        requirements=rig.requirements,
        limits=rig.limits,
        setting=rig.setting,
        progress=progress,
        units=Units(rig.command_unit, rig.response_unit),
        alone=alone,
    )


def _not_fresh(compared: Compared, twin: Source) -> Compared:
    """A record that was fitted says nothing about the fit, however well it agrees."""
    return replace(compared, verdict="not comparable", why=f"its samples were fitted as {twin.spec.shown}")


def _cautions(
    rig: Rig,
    records: Sequence[Source],
    fit: Fit,
    design: Design,
    closing: Sequence[Compared],
    ladder: Ladder | None,
) -> tuple[str, ...]:
    findings = [(record.spec.shown, each) for record in records for each in record.findings]
    said = [f"{shown}: {each.text}" for shown, each in findings if each.refuses == "no"]
    left_out = [each for each in closing if each.verdict == "not comparable"]
    aside = [f"held-out {each.label} was not comparable: {each.why}" for each in left_out]
    usual = cautions_for(rig, design, fit)
    climbing = (*([ladder.refusal] if ladder.refusal else []), *ladder.cautions) if ladder else ()
    return tuple(dict.fromkeys([*said, *fit.cautions, *design.cautions, *climbing, *aside, *usual]))
