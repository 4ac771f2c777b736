"""The report's tables as rows of texts."""

import math
from dataclasses import dataclass
from pathlib import PurePath
from typing import Any

from ...design.closing.compared import Compared
from ...design.designed import Design
from ...design.locus.condition import Working
from ...ident.fitted import Fit
from ..figures.locus import tags
from ..figures.words import number, with_unit
from ..outcome import Outcome
from ..parameter_unit import unit_of
from ..record import Source, TableRecord
from ..rigfile.rig import Rig
from ..sight_rows import sight_row
from . import words


@dataclass(frozen=True)
class Table:
    """A table of texts.

    Attributes
    ----------
    caption : str
    head : tuple of str
    rows : tuple of rows, each a tuple of str
    emphasis : index of the rows to be set apart
    """

    caption: str
    head: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]
    emphasis: tuple[int, ...] = ()


@dataclass(frozen=True)
class Form:
    """One form of the gains, ready to be typed in.

    Attributes
    ----------
    name, formula : str
    rows : tuple of (name, value with unit), or None where the form does not exist
    why : str
        Why it does not.
    """

    name: str
    formula: str
    rows: tuple[tuple[str, str], ...] | None
    why: str = ""


def forms(printed: dict[str, Any], missing: dict[str, str] | None = None) -> tuple[Form, ...]:
    """The forms of the sheet, in its order; `missing` says why one is not there."""
    why = missing or {}
    return tuple(
        Form(name, words.FORMS.get(name, ""), _gains(found), why.get(name, "")) for name, found in printed.items()
    )


def _gains(found: dict[str, Any] | None) -> tuple[tuple[str, str], ...] | None:
    if found is None:
        return None
    return tuple(
        (words.GAIN_NAMES.get(key, words.spaced(key)), with_unit(each["value"], each["unit"], 7))
        for key, each in found.items()
        if isinstance(each, dict) and each.get("value") is not None
    )


def requirements(design: Design) -> Table:
    """What was asked, what is predicted, and whether it is met."""
    rows = tuple(
        (
            words.in_words(each.requirement) + (" (floor, not asked for)" if each.floor else ""),
            words.bound(each.requirement),
            words.scaled(each.predicted, each.requirement),
            words.interval(each),
            "met" if each.met else "NOT MET",
        )
        for each in design.judged
    )
    head = ("requirement", "limit", "predicted", "95 % of the plausible plants", "")
    return Table("Requirements", head, rows, _wrong(rows, "NOT MET"))


def limits(design: Design) -> Table:
    """Each hardware limit against the worst plausible plant."""
    rows = tuple(
        (
            each.name,
            with_unit(each.limit, each.unit),
            with_unit(each.predicted_worst, each.unit),
            with_unit(each.headroom, each.unit, 3),
            "kept" if each.met else "PASSED",
        )
        for each in design.limits
    )
    return Table("Hardware limits", ("limit", "at", "worst predicted", "headroom", ""), rows, _wrong(rows, "PASSED"))


def _wrong(rows: tuple[tuple[str, ...], ...], sign: str) -> tuple[int, ...]:
    return tuple(place for place, row in enumerate(rows) if row[-1] == sign)


def parameters(fit: Fit, command_unit: str, response_unit: str) -> Table:
    """The fitted plant."""
    rows = []
    for each in fit.parameters:
        unit = unit_of(each, fit.plant.integrators, command_unit, response_unit)
        ends = f"{number(each.low)} to {with_unit(each.high, unit)}"
        rows.append((each.name, with_unit(each.value, unit), number(each.std_error, 2), ends))
    return Table("Fitted plant", ("parameter", "value", "standard error", "95 % interval"), tuple(rows))


def candidates(fit: Fit) -> Table:
    """The structures that were tried, with what speaks for each."""
    rows = tuple(
        (each.structure, number(each.misfit, 3), number(each.criterion, 5), words.share(each.weight), each.note)
        for each in fit.candidates
    )
    head = ("structure", "misfit", "Bayesian criterion", "share of the evidence", "remark")
    return Table("Structures tried", head, rows, (0,))


def tried(design: Design) -> Table:
    """The controller structures that the search tried."""
    rows = tuple(
        (
            each.structure,
            number(each.slack, 2) if math.isfinite(each.slack) else "",
            words.share(each.share),
            words.spaced(each.worst),
        )
        for each in design.tried
    )
    chosen = tuple(place for place, row in enumerate(rows) if row[0] == design.gains.structure)
    head = ("controller", "least slack", "plants that meet everything", "what binds")
    return Table("Controllers tried", head, rows, chosen)


def magnitude(working: Working, unit: str) -> Table:
    """The working of the magnitude condition: every factor of |G_L| at the chosen point."""
    rows = [("leading coefficient", "", number(abs(working.leading), 6), "times")]
    for name, vector in tags(working):
        is_pole = name.startswith("p")
        kind, how = ("pole", "divided by") if is_pole else ("zero", "times")
        rows.append((f"vector from {kind} {name}", point(vector.root), number(vector.length, 6), how))
    rows.append(("dead time and computation, |exp(-sL)|", "", number(working.dead_time_factor, 6), "times"))
    rows.append(("hold, |(1 - exp(-sT))/(sT)|", "", number(working.hold_factor, 6), "times"))
    rows.append(("product |G_L|", "", number(working.product, 6), ""))
    rows.append(("K = 1/|G_L|", "", with_unit(working.loop_gain, unit, 6), ""))
    head = ("factor", "from (1/s)", "length or size", "enters the product")
    return Table("Working of the magnitude condition", head, tuple(rows), (len(rows) - 1,))


def point(s: complex) -> str:
    """A point of the s plane as text.

    Examples
    --------
    >>> point(complex(-2.0, 1.5)), point(complex(-2.0, 0.0))
    ('-2 + 1.5j', '-2')
    """
    if s.imag == 0.0:
        return number(s.real)
    return f"{number(s.real)} {'+' if s.imag > 0 else '-'} {number(abs(s.imag))}j"


def findings(outcome: Outcome) -> Table:
    """What was seen in the logs, one row a finding, and those without any."""
    rows: list[tuple[str, ...]] = []
    grave: list[int] = []
    for record in outcome.sources:
        for found in record.findings:
            if found.refuses != "no":
                grave.append(len(rows))
            rows.append((record.spec.shown, found.kind, found.where, found.size, found.action))
        if not record.findings:
            rows.append((record.spec.shown, "nothing found", "", "", ""))
    return Table("Log health", ("log", "finding", "where", "how much", "what was done"), tuple(rows), tuple(grave))


def logs(outcome: Outcome) -> Table:
    """The bytes and samples behind the report."""
    rows = tuple(
        (
            record.spec.shown, record.spec.use, record.spec.loop, _size(record),
            record.sha256, record.samples_sha256,
        )
        for record in outcome.sources
    )  # fmt: skip
    return Table("Logs", ("log", "use", "loop", "samples", "SHA-256 of the file", "SHA-256 of the samples"), rows)


def _size(source: Source) -> str:
    if isinstance(source, TableRecord):
        return f"{len(source.table.frequency)} frequencies"
    return str(len(source.run.time))


def origin(provenance: dict[str, Any]) -> tuple[tuple[str, str], ...]:
    """Program, libraries and rig file, as name and value."""
    rig_file = provenance.get("rig_file", {})
    packages = provenance.get("packages", {})
    rows = (
        ("gainwright", str(provenance.get("gainwright", ""))),
        ("Python", str(provenance.get("python", ""))),
        ("made", str(provenance.get("created", ""))),
        ("rig file", PurePath(str(rig_file.get("file", ""))).name),
        ("SHA-256 of the rig file", str(rig_file.get("sha256", ""))),
        ("libraries", ", ".join(f"{name} {version}" for name, version in packages.items())),
    )
    return tuple(row for row in rows if row[1])


def seen(compared: Compared, rig: Rig) -> Table | None:
    """Overshoot, rise, settling and final value of a held-out step, predicted beside measured; None without one."""
    step = sight_row(compared.sight, rig.command_unit, rig.response_unit)
    if step is None:
        return None
    start, end = (with_unit(step[key]["value"], step[key]["unit"]) for key in ("from", "to"))
    band = f" (band {number(100.0 * step['settling_band'])} %)"
    rows = tuple(
        (
            row["name"] + (band if row["name"] == "settling time" else ""),
            _with_interval(row["predicted"], row["predicted_interval_95"], row["unit"]),
            _with_interval(row["measured"], row["measured_interval_95"], row["unit"]),
        )
        for row in step["measures"]
    )
    caption = f"Its largest step: the {step['moved']} goes from {start} to {end} at {number(step['at'])} s"
    return Table(caption, ("what is seen", "predicted (95 %)", "measured (95 %)"), rows)


def _with_interval(value: float | None, interval: list[float] | None, unit: str) -> str:
    if value is None:
        return "not to be seen"
    told = with_unit(value, unit, 3)
    return told if interval is None else f"{told} ({number(interval[0], 3)} to {number(interval[1], 3)})"
