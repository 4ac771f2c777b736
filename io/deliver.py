"""A job with its results on disk: the output folder is held from start to end, and filled whole or not at all."""

import hashlib
import json
from collections.abc import Callable, Mapping
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

from ..design.aside import HERE, Aside
from ..ident.errors import RequestError
from .outcome import Outcome
from .progress import Progress, silent
from .write_whole import SHEET, OutputFolder

if TYPE_CHECKING:
    from .rigfile.rig import Rig


SUPERSEDED = "gains.superseded.json"


def _nothing(outcome: Outcome) -> Mapping[str, bytes]:
    return {}


def _as_it_is(outcome: Outcome, progress: Progress) -> Outcome:
    return outcome


def deliver(
    rig_path: Path,
    folder: Path,
    *,
    with_report: bool = True,
    progress: Progress = silent,
    change: "Callable[[Rig], Rig] | None" = None,
    more: Callable[[Outcome], Mapping[str, bytes]] = _nothing,
    finish: Callable[[Outcome, Progress], Outcome] = _as_it_is,
    aside: Aside = HERE,
) -> Outcome:
    """Process a rig file and write gain sheet, dossier and report into `folder`.

    Parameters
    ----------
    rig_path, folder : Path
    with_report : bool
    progress : Progress
    change : callable or None
        As `process_rig` takes it.
    more : callable
        Further files, name to content, to be written with the results.
    finish : callable
        Adds to the finished job before it is written.
    aside : Aside
        Takes work that can be done meanwhile.

    Raises
    ------
    RequestError, RecordError
        As `process_rig`; then `folder` holds no current gain sheet.
    """
    if not rig_path.is_file() and not folder.exists():
        raise RequestError(
            "there is no such rig file",
            where=str(rig_path),
            found="a folder" if rig_path.is_dir() else "nothing",
            expected="a rig file (TOML)",
            advice="check the path; `gainwright process --help` shows the call",
        )
    with OutputFolder(folder) as output:
        progress("loading the libraries")
        from .job import process_rig  # imported late: an output folder that can't be used is said at once

        outcome = process_rig(rig_path, progress, change, aside)
        outcome = _with_trail(finish(outcome, progress), folder / SUPERSEDED)
        progress("writing the results")
        output.write({**more(outcome), **_contents(outcome, with_report, aside)})
    return outcome


def _with_trail(outcome: Outcome, earlier: Path) -> Outcome:
    """The sheet that this one replaces, in its provenance, unless the job knows better."""
    if "replaces" in outcome.provenance or not earlier.is_file():
        return outcome
    content = earlier.read_bytes()
    trail: dict[str, Any] = {"file": earlier.name, "sha256": hashlib.sha256(content).hexdigest()}
    try:
        sheet = json.loads(content)
        trail |= {"created": sheet["provenance"]["created"], "status": sheet["status"]}
    except (ValueError, KeyError, TypeError):
        pass  # the hash alone still finds it
    return replace(outcome, provenance={**outcome.provenance, "replaces": trail})


def _contents(outcome: Outcome, with_report: bool, aside: Aside) -> dict[str, bytes]:
    from .dossier import dossier_bytes
    from .sheet import sheet_bytes, sheet_of

    if not with_report:
        return {SHEET: sheet_bytes(sheet_of(outcome)), "dossier.h5": dossier_bytes(outcome)}
    from .report.page import PARTS, report_html

    parts = [aside.start(work, outcome) for work in PARTS]
    sheet, dossier = sheet_bytes(sheet_of(outcome)), dossier_bytes(outcome)
    report = report_html(outcome, parts).encode()
    return {SHEET: sheet, "dossier.h5": dossier, "report.html": report}
