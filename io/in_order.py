"""Samples brought in order: the clock mended, what was seen said, and a stop where the record can't be used."""

import numpy as np

from ..ident.errors import RecordError
from ..ident.health.clock import mend_clock
from ..ident.health.seen import Seen
from .record import Finding
from .rigfile.rig import RunSpec
from .samples import Samples


def in_order(spec: RunSpec, samples: Samples, findings: list[Finding]) -> Samples:
    """Samples in order, time from the first sample, those without a command left out."""
    rows = np.column_stack([samples.logged_command, samples.logged_response])
    clock = mend_clock(samples.time, np.nan_to_num(rows, nan=np.inf))
    findings += [finding_of(seen) for seen in clock.seen]
    raise_stops(spec, findings)
    mended = samples.take(clock.keep)
    mended = Samples(
        clock.time, mended.command, mended.response, mended.setpoint, mended.logged_command, mended.logged_response
    )
    lost = ~np.isfinite(mended.command)
    if lost.any():
        places = mended.time[lost]
        findings.append(
            Finding(
                "lost commands",
                f"{places[0]:.6g} s to {places[-1]:.6g} s",
                f"{lost.sum()} samples",
                "left out: the command of the sample before is taken as held",
            )
        )
    if lost.mean() > 0.2:
        raise RecordError(
            "the command is lost in too many samples",
            where=str(spec.file),
            found=f"{lost.sum()} of {len(lost)} samples",
            advice="check the command's source and lost_as",
        )
    return mended.take(~lost)


def finding_of(seen: Seen) -> Finding:
    """What was seen, as a finding of the record."""
    return Finding(seen.kind, seen.where, seen.size, seen.action, seen.refuses)


def raise_stops(spec: RunSpec, findings: list[Finding]) -> None:
    """Stop where a finding says so.

    Raises
    ------
    RecordError
    """
    stops = [finding for finding in findings if finding.refuses == "stops"]
    if stops:
        first = stops[0]
        raise RecordError(
            f"this log can't be used: {first.kind}",
            where=str(spec.file),
            found=f"{first.where}: {first.size}",
            advice=first.action,
        )
