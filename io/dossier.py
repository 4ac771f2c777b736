"""The dossier: every number behind a sheet in one HDF5 file that needs nothing but an HDF5 library to be read.

Each dataset carries `units` and `description`. NaN stands for "never" and "not bounded"; the layout is in
DEVELOPERS.md.
"""

import io
from collections.abc import Sequence

import h5py
import numpy as np
from numpy.typing import NDArray

from ..design.closing.compared import Compared
from ..design.designed import Design, GainInterval, Trajectory
from ..ident.fitted import Fit, FittedRun, Plausible
from ..ident.run import FloatArray
from .change_dossier import put_change
from .dossier_parts import numbers as _numbers
from .dossier_parts import texts as _words
from .ladder_dossier import put_ladder
from .outcome import Outcome
from .parameter_unit import unit_of
from .record import Record
from .rigfile.rig import Rig
from .table_dossier import put_fitted_table, put_table

SCHEMA = "gainwright.dossier/1"


def dossier_bytes(outcome: Outcome) -> bytes:
    """The dossier as the bytes of an HDF5 file.

    Parameters
    ----------
    outcome : Outcome
    """
    memory = io.BytesIO()
    with h5py.File(memory, "w") as file:
        file.attrs["schema"] = SCHEMA
        file.attrs["status"] = outcome.status
        file.attrs["rig"] = outcome.rig.name
        file.attrs["created"] = str(outcome.provenance.get("created", ""))
        file.attrs["gainwright"] = str(outcome.provenance.get("gainwright", ""))
        _words(file, "reasons", outcome.reasons, "why the gains are held; empty when released")
        _words(file, "cautions", outcome.cautions, "what to mind before the first run")
        for place, record in enumerate(outcome.records):
            _put_record(file.create_group(f"runs/{place}"), record, outcome.rig)
        for place, table in enumerate(outcome.tables):
            put_table(file.create_group(f"tables/{place}"), table, outcome.rig)
        if outcome.fit is not None:
            _put_fit(file.create_group("fit"), outcome.fit, outcome.rig)
            _put_plausible(file.create_group("plausible"), outcome.fit.plausible, outcome.rig)
        if outcome.design is not None:
            _put_design(file.create_group("design"), outcome.design, outcome.rig)
        if outcome.ladder is not None:
            put_ladder(file.create_group("ladder"), outcome.ladder, outcome.rig)
        if outcome.retuned is not None:
            put_change(file.create_group("change"), outcome.retuned)
        for place, compared in enumerate(outcome.closing):
            _put_compared(file.create_group(f"closing/{place}"), compared, outcome.rig)
    return memory.getvalue()


def _traces(group: h5py.Group, rig: Rig, traces: Sequence[tuple[str, FloatArray, str, str]]) -> None:
    """Arrays over time; the third entry says whose unit: "s", "command" or "response"."""
    units = {"s": "s", "command": rig.command_unit, "response": rig.response_unit}
    for name, values, kind, description in traces:
        _numbers(group, name, values, units[kind], description)


def _put_record(group: h5py.Group, record: Record, rig: Rig) -> None:
    run = record.run
    group.attrs["file"] = record.spec.shown
    group.attrs["use"] = record.spec.use
    group.attrs["sha256"] = record.sha256
    group.attrs["samples_sha256"] = record.samples_sha256
    _traces(
        group,
        rig,
        [
            ("time", run.time, "s", "from the record's first sample"),
            ("command", run.command, "command", _command_from(record)),
            ("response", run.response, "response", "as logged, scaled to the reading; NaN where a sample is lost"),
        ],
    )
    if run.setpoint is not None:
        _traces(group, rig, [("setpoint", run.setpoint, "response", "as logged")])
    _words(group, "findings", (each.text for each in record.findings), "what was seen in this record")


def _command_from(record: Record) -> str:
    logged = "command" in record.spec.signals
    return "as logged, scaled to the reading" if logged else "not logged: worked out from the gains in force"


def _put_fit(group: h5py.Group, fit: Fit, rig: Rig) -> None:
    group.attrs["structure"] = fit.structure
    group.attrs["explanation"] = fit.explanation
    group.attrs["misfit"] = fit.misfit
    plant_units = f"{rig.response_unit} per {rig.command_unit}, powers of s"
    _numbers(group, "numerator", fit.plant.numerator, plant_units, "of the plant, highest power of s first")
    _numbers(group, "denominator", fit.plant.denominator, "powers of s", "of the plant, highest power of s first")
    _numbers(group, "dead_time", [fit.plant.dead_time], "s", "of the rig alone")
    point = [fit.operating_command, *fit.operating_command_interval]
    _numbers(group, "operating_command", point, rig.command_unit, "value, then its 95 % interval")
    _numbers(group, "operating_response", [fit.operating_response], rig.response_unit, "where the deviations start")
    group.attrs["between_samples"] = fit.between
    if fit.draws.size:
        text = "draws of the chosen structure: logarithms of its shape parameters, dead time in s, gain; "
        text += "with a zero, gain times zero time too; one row a draw"
        _numbers(group, "draws", fit.draws, "mixed", text)
    _put_parameters(group.create_group("parameters"), fit, rig)
    _put_noise(group, fit, rig)
    _put_candidates(group.create_group("candidates"), fit)
    for place, run in enumerate(fit.runs):
        _put_fitted_run(group.create_group(f"runs/{place}"), run, rig)
    for place, table in enumerate(fit.tables):
        put_fitted_table(group.create_group(f"tables/{place}"), table, rig)


def _put_parameters(group: h5py.Group, fit: Fit, rig: Rig) -> None:
    units = [unit_of(each, fit.plant.integrators, rig.command_unit, rig.response_unit) for each in fit.parameters]
    _words(group, "name", (each.name for each in fit.parameters), "order of the rows below")
    _words(group, "unit", units, "of each row")
    _numbers(group, "value", (each.value for each in fit.parameters), "see unit", "best estimate")
    _numbers(group, "std_error", (each.std_error for each in fit.parameters), "see unit", "standard error")
    _numbers(group, "low", (each.low for each in fit.parameters), "see unit", "lower end of the 95 % interval")
    _numbers(group, "high", (each.high for each in fit.parameters), "see unit", "upper end of the 95 % interval")
    _numbers(group, "covariance", fit.covariance, "products of unit", "of the parameters, in their order")


def _put_noise(group: h5py.Group, fit: Fit, rig: Rig) -> None:
    noise = fit.noise
    text = "of the response, e[k] - rho e[k-1] = w[k] + c w[k-1]: interval, std of e, std of w, rho, c"
    values = [noise.interval, noise.std, noise.innovation_std, noise.rho, noise.c]
    _numbers(group, "noise", values, f"s, {rig.response_unit}, {rig.response_unit}, 1, 1", text)


def _put_candidates(group: h5py.Group, fit: Fit) -> None:
    _words(group, "structure", (each.structure for each in fit.candidates), "structures that were tried, best first")
    _numbers(group, "misfit", (each.misfit for each in fit.candidates), "1", "rms residual / std of the response")
    _numbers(group, "criterion", (each.criterion for each in fit.candidates), "1", "Bayesian information criterion")
    _numbers(group, "weight", (each.weight for each in fit.candidates), "1", "share of the evidence")
    _words(group, "note", (each.note for each in fit.candidates), "why it was kept or dropped")


def _put_fitted_run(group: h5py.Group, run: FittedRun, rig: Rig) -> None:
    group.attrs["label"] = run.label
    group.attrs["offset"] = run.offset
    _traces(
        group,
        rig,
        [
            ("time", run.time, "s", "from the record's first sample"),
            ("command", run.command, "command", "as fitted"),
            ("response", run.response, "response", "as fitted"),
            ("model", run.model, "response", "free run of the plant with this record's offset"),
            ("residual", run.response - run.model, "response", "response less model"),
        ],
    )


def _put_plausible(group: h5py.Group, plausible: Plausible, rig: Rig) -> None:
    plants = plausible.plants
    text = "one row a plant, highest power of s first, zeros in front of the shorter ones"
    _numbers(group, "numerator", _rows([each.numerator for each in plants]), "powers of s", text)
    _numbers(group, "denominator", _rows([each.denominator for each in plants]), "powers of s", text)
    _numbers(group, "dead_time", (each.dead_time for each in plants), "s", "of the rig alone, one a plant")
    text = "command that holds the operating response, one a plant"
    _numbers(group, "operating_command", plausible.operating_command, rig.command_unit, text)
    _numbers(group, "stiction", plausible.stiction, rig.command_unit, "change of command that friction swallows")
    if plausible.valves is not None:
        text = "valve that sticks: band, how far short of the command it rests, how far above it the command is at rest"
        _numbers(group, "valves", plausible.valves, rig.command_unit, text)
    if plausible.curves is not None:
        text = "gain that differs along the command: bend about the operating one, and the plant's gain over that there"
        _numbers(group, "curves", plausible.curves, f"1/({rig.command_unit}), 1", text)


def _rows(coefficients: Sequence[tuple[float, ...]]) -> NDArray[np.float64]:
    width = max((len(each) for each in coefficients), default=0)
    return np.array([[0.0] * (width - len(each)) + list(each) for each in coefficients], dtype=float)


def _put_design(group: h5py.Group, design: Design, rig: Rig) -> None:
    gains, selection = design.gains, design.selection
    group.attrs["structure"] = gains.structure
    group.attrs["share_meeting"] = design.share_meeting
    group.attrs["plants_checked"] = design.plants_checked
    group.attrs["all_stable"] = design.all_stable
    group.attrs["limits_kept"] = design.limits_kept
    group.attrs["clamped_share"] = design.clamped_share
    group.attrs["clamped_duration"] = design.clamped_duration
    parallel = [gains.proportional, gains.integral, gains.derivative, gains.filter_time, gains.zero, gains.pole]
    units = f"{rig.command_unit} per {rig.response_unit}: 1, 1/s, s; then s, 1/s, 1/s"
    text = "proportional, integral, derivative, filter time; zero and pole of lead and lag"
    _numbers(group, "gains", parallel, units, text)
    group.attrs["continuous"] = design.continuous
    _put_law(group.create_group("law"), design)
    picked = group.create_group("selection")
    _numbers(picked, "loop_gain", [selection.loop_gain], selection.loop_gain_unit, "K of the magnitude condition")
    for name, pole in (("pole", selection.pole), ("sampled_pole", selection.sampled_pole)):
        _numbers(picked, name, [pole.real, pole.imag], "1/s", "real and imaginary part")
    _numbers(picked, "angle_residual", [selection.angle_residual_deg], "deg", "of the angle condition at that pole")
    _put_intervals(picked, "intervals", selection.intervals, "every K that meets all, fitted plant")
    _put_intervals(picked, "intervals_plausible", selection.intervals_plausible, "the same, plausible plants")
    for name, intervals in selection.rows:
        _put_intervals(picked, f"rows/{name}", intervals, "every K that meets this requirement, fitted plant")
    _put_judged(group, design)
    if design.trajectory is not None:
        _put_trajectory(group.create_group("trajectory"), design.trajectory, rig)


def _put_law(group: h5py.Group, design: Design) -> None:
    law = design.law
    group.attrs["update_interval"] = law.update_interval
    for name in ("command", "setpoint", "response", "memory"):
        _numbers(group, name, getattr(law, name), "see gains", "coefficients of the difference equation, newest first")
    clamp = [law.clamp.lowest, law.clamp.highest, law.clamp.rate]
    _numbers(group, "clamp", clamp, "command unit, and per s", "lowest, highest (deviations), rate")


def _put_intervals(group: h5py.Group, name: str, intervals: Sequence[GainInterval], description: str) -> None:
    ends = np.array([[np.nan if end is None else end for end in each] for each in intervals], dtype=float)
    _numbers(group, name, ends.reshape(-1, 2), "as loop_gain", f"{description}; one row low, high")


def _put_judged(group: h5py.Group, design: Design) -> None:
    asked = group.create_group("requirements")
    rows = design.judged
    _words(asked, "name", (each.requirement.name for each in rows), "order of the rows below")
    base = "base units: s, response unit, command unit, dB, deg, fractions"
    _numbers(asked, "limit", (each.requirement.limit for each in rows), base, "what is asked for")
    _numbers(asked, "predicted", (each.predicted for each in rows), base, "on the fitted plant; NaN: never")
    _numbers(asked, "low", (each.low for each in rows), base, "lower end over 95 % of the plausible plants")
    _numbers(asked, "high", (each.high for each in rows), base, "upper end over 95 % of the plausible plants")
    _numbers(asked, "met", (float(each.met) for each in rows), "1", "1 where met on the wished share of plants")
    limits = group.create_group("limits")
    _words(limits, "name", (each.name for each in design.limits), "order of the rows below")
    _words(limits, "unit", (each.unit for each in design.limits), "of each row")
    _numbers(limits, "limit", (each.limit for each in design.limits), "see unit", "of the hardware")
    _numbers(limits, "predicted_worst", (each.predicted_worst for each in design.limits), "see unit", "worst plant")
    tried = group.create_group("tried")
    _words(tried, "structure", (each.structure for each in design.tried), "controllers that were tried")
    _numbers(tried, "slack", (each.slack for each in design.tried), "1", "smallest normalised slack reached")
    _numbers(tried, "share", (each.share for each in design.tried), "1", "of the plausible plants that meet all")
    _words(tried, "worst", (each.worst for each in design.tried), "the requirement that binds")


def _put_trajectory(group: h5py.Group, trajectory: Trajectory, rig: Rig) -> None:
    band = "of 95 % of the plausible plants at each time"
    _traces(
        group,
        rig,
        [
            ("time", trajectory.time, "s", "from the controller sample that first sees the setpoint"),
            ("setpoint", trajectory.setpoint, "response", "the test step"),
            ("response", trajectory.response, "response", "of the fitted plant"),
            ("response_low", trajectory.response_low, "response", f"lower end {band}"),
            ("response_high", trajectory.response_high, "response", f"upper end {band}"),
            ("command", trajectory.command, "command", "of the fitted plant"),
            ("command_low", trajectory.command_low, "command", f"lower end {band}"),
            ("command_high", trajectory.command_high, "command", f"upper end {band}"),
        ],
    )


def _put_compared(group: h5py.Group, compared: Compared, rig: Rig) -> None:
    group.attrs["label"] = compared.label
    group.attrs["verdict"] = compared.verdict
    group.attrs["why"] = compared.why
    group.attrs["misfit"] = compared.misfit
    group.attrs["noise_floor"] = compared.noise_floor
    group.attrs["coverage_95"] = compared.coverage_95
    if compared.table is not None:
        put_fitted_table(group.create_group("table"), compared.table, rig)
        return
    _traces(
        group,
        rig,
        [
            ("time", compared.time, "s", "from the record's first sample"),
            ("command", compared.command, "command", "as logged"),
            ("response", compared.response, "response", "as logged"),
            ("predicted", compared.predicted, "response", "free run of the fitted plant, or of its loop"),
            ("low", compared.low, "response", "lower end of the 95 % band, parameters and noise"),
            ("high", compared.high, "response", "upper end of the 95 % band, parameters and noise"),
        ],
    )
