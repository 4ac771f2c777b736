"""One simulated rig and several held-out runs of it, as it was and changed: what closing says, and what is true.

The only file beside the proof kit that calls gainwright in its own process: fit and design serve all held-out runs.
The truth comes from the kit: the very law is run on the true rig, changed or not.
"""

import traceback
from dataclasses import dataclass, field, replace
from pathlib import Path
from time import process_time

import numpy as np
import paths  # noqa: F401  (puts the kit on the path before it is imported)
from gainwright.design.closing.verdict import compare
from gainwright.design.closing.words import Units
from gainwright.design.design import design_gains
from gainwright.design.designed import Design
from gainwright.ident.errors import GainwrightError
from gainwright.ident.fitted import Fit
from gainwright.ident.identify import identify
from gainwright.io.read_record import read_record
from gainwright.io.record import Record
from gainwright.io.release import reasons_to_hold
from gainwright.io.rigfile.load import load_rig
from gainwright.io.rigfile.rig import Rig
from proof import logs
from proof.asked import write_rig_file
from proof.changes import draw_change
from proof.families import FAMILIES
from proof.job import Prepared, held_out_again, prepare
from proof.judged import finer, missed, run_law
from proof.margins import frequencies, sampled_plant
from true_rig import SheetController, TrueRig
from true_rig.controller import Equation

UNCHANGED = "none"


@dataclass
class Pair:
    """One held-out run against one fit.

    Attributes
    ----------
    kind, size : str
        Of the change; "none".
    before, after : dict of requirement or limit to share
        What the law breaks on the true rig as it was and as it is, by what share of the bound.
    verdict, why : str
        Of closing; "refused" where the record itself is.
    share : float or None
    """

    seed: int
    index: int
    family: str
    kind: str
    size: str
    verdict: str
    why: str
    share: float | None
    before: dict[str, float] = field(default_factory=dict)
    after: dict[str, float] = field(default_factory=dict)

    @property
    def sort(self) -> str:
        """unchanged, harmless, harmful; or already broken: the gains fail on the rig as it was."""
        if self.before:
            return "already broken"
        return "unchanged" if self.kind == UNCHANGED else "harmful" if self.after else "harmless"


@dataclass
class RigPairs:
    """All held-out runs of one rig; none, with the reason, where no gains were found that could be released."""

    seed: int
    index: int
    family: str
    pairs: list[Pair]
    without: str
    seconds: float


@dataclass(frozen=True, eq=False)
class Staged:
    """A rig fitted and designed for, its further held-out records read, the truth about each known.

    Attributes
    ----------
    told : list of (kind, size, what the law breaks there)
    held_out : list of Record
    before : what the law breaks on the rig as it was
    """

    rig: Rig
    fit: Fit
    design: Design
    told: list[tuple[str, str, dict[str, float]]]
    held_out: list[Record]
    before: dict[str, float]


def stage(seed: int, index: int, unchanged: int, changed: int, folder: Path) -> Staged | str:
    """Draw a rig, log it, fit and design once, and find out the truth about each held-out run.

    Parameters
    ----------
    unchanged, changed : int
        How many held-out runs of either kind.
    folder : Path
        Where the logs are written, and read by the program.

    Returns
    -------
    Staged, or why no gains were found that could be released.
    """
    generator = np.random.default_rng([seed, 50_000 + index])
    job = prepare(family_of(index), generator)
    now = [(UNCHANGED, job.drawn.rig, "") for _ in range(unchanged)]
    now += [draw_change(job.drawn, job.style.interval, generator) for _ in range(changed)]
    try:
        rig, fitted, held_out = _written(job, now, generator, folder)
        fit, design = _designed(rig, fitted)
    except GainwrightError as refused:
        return f"refused: {refused}".splitlines()[0]
    reasons = [text for text in reasons_to_hold(rig, fitted, design, ()) if not text.startswith("no held-out run")]
    if reasons:
        return "; ".join(reasons)
    law = _law(design, fit)
    before = _broken(law, job, job.drawn.rig)
    told = [(kind, size, before if kind == UNCHANGED else _broken(law, job, rig)) for kind, rig, size in now]
    return Staged(rig, fit, design, told, held_out, before)


def family_of(index: int) -> str:
    """The families in turn."""
    return list(FAMILIES)[index % len(FAMILIES)]


def answers(staged: Staged, seed: int, index: int) -> list[Pair]:
    """What closing says of every held-out run."""
    pairs = []
    for (kind, size, after), record in zip(staged.told, staged.held_out, strict=True):
        verdict, why, share = _answer(record, staged.rig, staged.fit, staged.design)
        pair = Pair(seed, index, family_of(index), kind, size, verdict, why, share)
        pairs.append(replace(pair, before=dict(staged.before), after=dict(after)))
    return pairs


def pairs_of_rig(seed: int, index: int, unchanged: int, changed: int, folder: Path) -> RigPairs:
    """All of it for one rig; see `stage`."""
    began = process_time()
    staged = stage(seed, index, unchanged, changed, folder)
    pairs = [] if isinstance(staged, str) else answers(staged, seed, index)
    without = staged if isinstance(staged, str) else ""
    return RigPairs(seed, index, family_of(index), pairs, without, process_time() - began)


def _written(
    job: Prepared, told: list[tuple[str, TrueRig, str]], generator: np.random.Generator, folder: Path
) -> tuple[Rig, list[Record], list[Record]]:
    """The rig file with all logs, and the records as the program reads them: fitted, held out."""
    folder.mkdir(parents=True, exist_ok=True)
    records = [each for each in job.records if each[1] == "fit"]
    for place, (_, now, _) in enumerate(told):
        records.append((f"check_{place + 1}.csv", "held-out", held_out_again(job, now, generator)))
    for name, _, made in records:
        logs.write(folder / name, made, job.style)
    about = replace(job.about, files=[(name, use) for name, use, _ in records])
    write_rig_file(folder / "rig.toml", job.asked, about)
    rig = load_rig(folder / "rig.toml")
    read = [(spec.use, read_record(spec, rig)) for spec in rig.runs]
    return rig, [r for use, r in read if use == "fit"], [r for use, r in read if use == "held-out"]


def _designed(rig: Rig, fitted: list[Record]) -> tuple[Fit, Design]:
    fit = identify(
        [record.run for record in fitted],
        operating_command=rig.operating_command,
        operating_response=rig.operating_response,
    )
    design = design_gains(
        fit.plant,
        fit.plausible,
        operating_command=fit.operating_command,
        operating_response=fit.operating_response,
        noise=fit.noise,
        requirements=rig.requirements,
        limits=rig.limits,
        setting=rig.setting,
        command_unit=rig.command_unit,
        response_unit=rig.response_unit,
    )
    return fit, design


def _answer(record: Record, rig: Rig, fit: Fit, design: Design) -> tuple[str, str, float | None]:
    refusing = [finding.text for finding in record.findings if finding.refuses != "no"]
    if refusing:
        return "refused", "; ".join(refusing), None
    try:
        found = compare(
            record.run,
            fit,
            design,
            requirements=rig.requirements,
            limits=rig.limits,
            setting=rig.setting,
            units=Units(rig.command_unit, rig.response_unit),
        )
    except Exception:  # noqa: BLE001  (a fault is counted as one, never as a verdict)
        return "fault", traceback.format_exc()[-600:], None
    return found.verdict, found.why, found.share_meeting


def _law(design: Design, fit: Fit) -> tuple[Equation, float, float]:
    law, endless = design.law, float("inf")
    clamp = law.clamp
    equation = Equation(
        law.update_interval,
        law.command,
        law.setpoint,
        law.response,
        law.memory,
        -endless if clamp.lowest is None else clamp.lowest,
        endless if clamp.highest is None else clamp.highest,
        endless if clamp.rate is None else clamp.rate,
    )
    return equation, fit.operating_command, fit.operating_response


def _broken(law: tuple[Equation, float, float], job: Prepared, rig: TrueRig) -> dict[str, float]:
    """What the law breaks on a true rig."""
    asked = job.asked
    frequency = frequencies(rig, asked.update_interval, 0.02 / asked.settling)
    plant = sampled_plant(rig, asked.update_interval, asked.computation_delay, frequency)
    return missed(asked, run_law(finer(rig, asked), SheetController(*law), asked, plant, frequency))
