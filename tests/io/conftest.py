"""A finished job made by hand, so that what leaves the program is tested without fitting anything."""

from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
import pytest
from gainwright.design.closing.compared import Compared
from gainwright.design.designed import Design, Judged, LimitJudged, Selection, Trajectory, Tried
from gainwright.design.gains import Gains
from gainwright.design.requirements import ControllerSetting, Limits, Requirement, Requirements
from gainwright.ident.fitted import Candidate, Fit, FittedRun, Noise, Parameter, Plausible
from gainwright.ident.law import Clamp, Law
from gainwright.ident.plant import Plant
from gainwright.ident.run import Run
from gainwright.io.outcome import Outcome
from gainwright.io.provenance import provenance_of
from gainwright.io.record import Finding, Record
from gainwright.io.rigfile.rig import LogDialect, Rig, RunSpec, Signal

SIGNALS = {
    "time": Signal("time_s", "s"),
    "command": Signal("drive_V", "V"),
    "response": Signal("meas", "mm", lowest=0.0, highest=300.0),
}


@dataclass(frozen=True)
class Made:
    """The parts of a job on an invented rig: 10 mm/V, a lag of 0.5 s, a dead time of 0.1 s, a PI controller."""

    rig: Rig
    records: tuple[Record, ...]
    fit: Fit
    design: Design
    closing: tuple[Compared, ...]

    def outcome(self, reasons: tuple[str, ...] = ()) -> Outcome:
        """Released without reasons, held with them."""
        return Outcome(
            rig=self.rig,
            records=self.records,
            fit=self.fit,
            design=self.design,
            closing=self.closing,
            status="held" if reasons else "released",
            reasons=reasons,
            cautions=("the cylinder can pinch: guard it",),
            provenance=provenance_of(self.rig, self.records),
        )

    def with_design(self, **changes: object) -> "Made":
        """The same with some fields of the design changed."""
        return replace(self, design=replace(self.design, **changes))


@pytest.fixture
def made() -> Made:
    """A job in which every condition of a release holds."""
    records = (_record("step_1.csv", "fit"), _record("step_2.csv", "held-out"))
    return Made(_rig(records), records, _fit(records[0].run), _design(), (_compared(records[1].run),))


def _record(name: str, use: str) -> Record:
    """4 s at 10 Hz: the drive steps from 1 V to 2 V after 0.5 s."""
    time = np.arange(40) * 0.1
    command = np.where(time < 0.5, 1.0, 2.0)
    after = np.clip(time - 0.6, 0.0, None)
    response = 100.0 + 10.0 * (1.0 - np.exp(-after / 0.5))
    spec = RunSpec(Path("/rig") / name, name, use, "open", "step", "held", SIGNALS, from_s=0.0, to_s=4.0)
    finding = Finding("quantised response", "whole record", "0.1 mm", "said, nothing done")
    return Record(spec, Run(name, time, command, response), f"{name}-sha", f"{name}-samples", (finding,))


def _rig(records: tuple[Record, ...]) -> Rig:
    requirements = Requirements(
        items=(
            Requirement("overshoot", 0.1, "at_most", "%", 100.0),
            Requirement("settling_time", 2.0, "at_most", "ms", 1000.0, band=0.02),
        ),
        test_step=20.0,
    )
    limits = Limits(-10.0, 10.0, 200.0, 0.0, 300.0, None)
    return Rig(
        "invented paddle",
        Path("/rig/rig.toml"),
        "rig-sha",
        "V",
        "mm",
        SIGNALS,
        tuple(record.spec for record in records),
        LogDialect(),
        ControllerSetting(0.005, 0.001),
        requirements,
        limits,
    )


def _fit(run: Run) -> Fit:
    plant = Plant((10.0,), (0.5, 1.0), 0.1)
    resonance = Plant((40.0, 10.0), (0.1, 0.5, 1.0), 0.12)
    parameters = (
        Parameter("gain", 10.0, "", 0.1, 9.8, 10.2),
        Parameter("time constant", 0.5, "s", 0.01, 0.48, 0.52),
        Parameter("dead time", 0.1, "s", 0.002, 0.096, 0.104),
    )
    return Fit(
        structure="lag with dead time",
        plant=plant,
        parameters=parameters,
        covariance=np.diag([0.01, 1e-4, 4e-6]),
        operating_command=1.0,
        operating_response=100.0,
        operating_command_interval=(0.98, 1.02),
        noise=Noise(0.1, 0.2, 0.1, 0.8, 0.0),
        runs=(FittedRun(run.label, run.time, run.command, run.response, run.response - 0.25, 100.0),),
        misfit=0.02,
        candidates=(Candidate("lag with dead time", 0.02, -100.0, 1.0, "kept"),),
        ties=(),
        plausible=Plausible((plant, resonance), np.array([1.0, 1.01]), np.zeros(2)),
        explanation="the simplest structure that explains the record",
        cautions=("one amplitude only",),
    )


def _design() -> Design:
    gains = Gains("PI", proportional=0.1234567890123, integral=0.2)
    law = Law(0.005, (1.0, -1.0), (0.1239567890123, -0.1229567890123), (0.1239567890123, -0.1229567890123), (1.0, -0.5),
              Clamp(-11.0, 9.0, None))  # fmt: skip
    selection = Selection(
        0.1234567890123, "V/mm", complex(-2.0, 3.0), 0.001, complex(-2.01, 3.02), ((0.05, 0.2),), ((0.1, 0.15),),
        (("overshoot", ((None, 0.2),)),),
    )  # fmt: skip
    floors = (
        Judged(Requirement("gain_margin", 6.0, "at_least", "dB"), float("inf"), 12.0, float("inf"), True, floor=True),
        Judged(Requirement("phase_margin", 30.0, "at_least", "deg"), 60.0, 55.0, 65.0, True, floor=True),
        Judged(Requirement("peak_sensitivity", 2.0, "at_most"), 1.4, 1.3, 1.5, True, floor=True),
    )
    asked = (
        Judged(Requirement("overshoot", 0.1, "at_most", "%", 100.0), 0.05, 0.04, 0.08, True),
        Judged(Requirement("settling_time", 2.0, "at_most", "ms", 1000.0, band=0.02), None, 1.5, None, True),
    )
    time = np.linspace(0.0, 4.0, 9)
    flat = np.full(9, 120.0)
    return Design(
        gains=gains,
        law=law,
        selection=selection,
        judged=asked + floors,
        limits=(LimitJudged("response highest", 300.0, 130.0, "mm", 170.0, True),),
        share_meeting=0.97,
        plants_checked=1200,
        all_stable=True,
        limits_kept=True,
        clamped_share=0.0,
        clamped_duration=0.0,
        trajectory=Trajectory(time, flat, flat, flat - 1, flat + 1, flat / 60, flat / 61, flat / 59),
        tried=(Tried("PI", 0.1, 0.97, "overshoot"),),
        reasons=(),
    )


def _compared(run: Run) -> Compared:
    return Compared(
        run.label, run.time, run.command, run.response, run.response - 0.25, run.response - 1, run.response + 1,
        0.03, 0.02, 0.96, "agrees", "the misfit is that of the noise",
    )  # fmt: skip
