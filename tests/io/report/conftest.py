"""A made-up finished job, plausible in every part, for what only shows results: report, pictures, terminal."""

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from gainwright.design.closing.compared import Compared
from gainwright.design.designed import Design, Judged, LimitJudged, Selection, Trajectory, Tried
from gainwright.design.gains import Gains
from gainwright.design.ladder.build import build_ladder
from gainwright.design.ladder.rung import Ladder
from gainwright.design.requirements import ControllerSetting, Limits, Requirement, Requirements
from gainwright.ident.fitted import Candidate, Fit, FittedRun, Noise, Parameter, Plausible
from gainwright.ident.law import Clamp, Law
from gainwright.ident.plant import Plant
from gainwright.ident.run import Run
from gainwright.io.outcome import Outcome
from gainwright.io.record import Finding, Record
from gainwright.io.rigfile.rig import LogDialect, Rig, RunSpec, Signal

GAIN, TAU, DEAD = 12.0, 0.5, 0.12  # mm/V, s, s
P, I = 0.13, 0.21  # V/mm, V/(mm s)  # noqa: E741
T, DELAY = 0.02, 0.002  # s
START, STEP = 120.0, 20.0  # mm
COMMAND = 3.0  # V at the operating point


def follow(command: Any, dt: float, gain: float = GAIN, tau: float = TAU, dead: float = DEAD) -> Any:
    """A lag with dead time by small Euler steps; the command before the record is zero. (n,) array."""
    shift = round(dead / dt)
    late = np.concatenate([np.zeros(shift), command])[: len(command)]
    y = np.zeros(len(command))
    for k in range(1, len(command)):
        y[k] = y[k - 1] + dt / tau * (gain * late[k - 1] - y[k - 1])
    return y


def close_loop(time: Any, gain: float, tau: float, dead: float) -> tuple[Any, Any]:
    """Response and command to the setpoint step under PI, deviations; two (n,) arrays."""
    dt = float(time[1] - time[0])
    every, shift = round(T / dt), round((dead + DELAY) / dt)
    y, u, total, now = np.zeros(len(time)), np.zeros(len(time)), 0.0, 0.0
    for k in range(len(time)):
        if k:
            late = u[k - 1 - shift] if k - 1 >= shift else 0.0
            y[k] = y[k - 1] + dt / tau * (gain * late - y[k - 1])
        if k % every == 0:
            total += I * T * (STEP - y[k])
            now = P * (STEP - y[k]) + total
        u[k] = now
    return y, u


def open_loop(s: complex) -> complex:
    """G_L of the law and plant above: (s + I/P)/s * plant * dead time and delay * hold."""
    hold = (1 - np.exp(-s * T)) / (s * T)
    return complex((s + I / P) / s * GAIN / (TAU * s + 1) * np.exp(-s * (DEAD + DELAY)) * hold)


def chosen_point() -> complex:
    """A closed-loop pole at K = P by Newton's method on 1 + K G_L = 0, 1/s."""
    s = complex(-3.0, 3.0)
    for _ in range(60):
        slope = (open_loop(s + 1e-6) - open_loop(s - 1e-6)) / 2e-6
        s -= (1 + P * open_loop(s)) / (P * slope)
    return s


def make_fit(rng: np.random.Generator, label: str, interval: float) -> Fit:
    """A lag with dead time fitted to one record of three steps."""
    time = np.arange(0.0, 12.0, interval)
    command = np.where(time < 1.0, 0.0, np.where(time < 5.0, 2.0, np.where(time < 9.0, -1.0, 0.5)))
    model = START + follow(command, interval)
    noise = np.convolve(rng.normal(0.0, 0.5, len(time) + 4), np.ones(5) / 5**0.5, "valid")
    run = FittedRun(label, time, command + COMMAND, model + noise, model, START)
    rows = [("gain", GAIN, "mm/V", 0.11), ("time constant", TAU, "s", 0.012), ("dead time", DEAD, "s", 0.004)]
    draws = [Plant((k,), (t, 1.0), d) for k, t, d in rng.normal([GAIN, TAU, DEAD], [0.11, 0.012, 0.004], (40, 3))]
    candidates = (
        Candidate("lag", 0.0421, 812.4, 0.93, "kept"),
        Candidate("two lags", 0.0420, 817.9, 0.06, "the second time constant is not told from zero"),
        Candidate("resonance", 0.0502, 1210.0, 0.0, ""),
    )
    return Fit(
        structure="lag with dead time", plant=Plant((GAIN,), (TAU, 1.0), DEAD),
        parameters=tuple(Parameter(n, v, u, e, v - 1.96 * e, v + 1.96 * e) for n, v, u, e in rows),
        covariance=np.diag([row[3] ** 2 for row in rows]), operating_command=COMMAND, operating_response=START,
        operating_command_interval=(2.97, 3.04), noise=Noise(interval, 0.5, 0.45, 0.6), runs=(run,), misfit=0.0421,
        candidates=candidates, ties=(), plausible=Plausible(tuple(draws), np.full(40, COMMAND), np.zeros(40)),
        explanation="One lag explains the records as well as two, and needs a parameter less.",
    )  # fmt: skip


def make_trajectory(rng: np.random.Generator) -> Trajectory:
    """The test step on the fitted plant and on a dozen others."""
    time = np.arange(0.0, 3.2, 0.004)
    best = close_loop(time, GAIN, TAU, DEAD)
    many = [close_loop(time, *draw) for draw in rng.normal([GAIN, TAU, DEAD], [0.3, 0.03, 0.008], (12, 3))]
    y, u = np.array([pair[0] for pair in many]) + START, np.array([pair[1] for pair in many]) + COMMAND
    setpoint = np.full(len(time), START + STEP)
    return Trajectory(time, setpoint, best[0] + START, y.min(0), y.max(0), best[1] + COMMAND, u.min(0), u.max(0))


REQUIREMENTS = (
    Requirement("overshoot", 0.10, "at_most", "%", 100.0),
    Requirement("settling_time", 1.6, "at_most", "s", band=0.02),
    Requirement("steady_state_error", 0.2, "at_most", "mm"),
    Requirement("command_noise", 0.2, "at_most", "V"),
    Requirement("gain_margin", 6.0, "at_least", "dB"),
    Requirement("phase_margin", 45.0, "at_least", "deg"),
)
JUDGED = (
    Judged(REQUIREMENTS[0], 0.0312, 0.0, 0.071, True),
    Judged(REQUIREMENTS[1], 1.12, 0.94, 1.41, True),
    Judged(REQUIREMENTS[2], 0.0, 0.0, 0.004, True),
    Judged(REQUIREMENTS[3], 0.065, 0.061, 0.072, True),
    Judged(REQUIREMENTS[4], 10.1, 9.2, 11.0, True),
    Judged(REQUIREMENTS[5], 61.8, 58.9, 64.5, True),
    Judged(Requirement("peak_sensitivity", 2.0, "at_most"), 1.42, 1.38, 1.49, True, floor=True),
)
LIMITS = Limits(-10.0, 10.0, 200.0, 0.0, 300.0, None)
LIMITS_JUDGED = (
    LimitJudged("command lowest", -10.0, 2.9, "V", 12.9, True),
    LimitJudged("command highest", 10.0, 5.92, "V", 4.08, True),
    LimitJudged("command rate", 200.0, 143.0, "V/s", 57.0, True),
    LimitJudged("response lowest", 0.0, 119.8, "mm", 119.8, True),
    LimitJudged("response highest", 300.0, 142.1, "mm", 157.9, True),
)


def make_design(rng: np.random.Generator) -> Design:
    """The PI law above with its ribbon."""
    pole = chosen_point()
    rows = (
        ("overshoot", ((None, 0.161),)),
        ("settling_time", ((0.092, 0.148), (0.152, 0.168))),
        ("steady_state_error", ((None, 0.44),)),
        ("command_noise", ((None, 0.38),)),
        ("gain_margin", ((None, 0.208),)),
        ("phase_margin", ((None, 0.176),)),
    )
    selection = Selection(
        P, "V/mm", pole, float(np.degrees(np.angle(-open_loop(pole)))), pole * 1.003,
        ((0.092, 0.148), (0.152, 0.161)), ((0.105, 0.143),), rows,
    )  # fmt: skip
    law = Law(T, (1.0, -1.0), (P + I * T, -P), (P + I * T, -P), (1.0,), Clamp(-13.0, 7.0, 200.0))
    return Design(
        gains=Gains("PI", P, I), law=law, selection=selection, judged=JUDGED, limits=LIMITS_JUDGED,
        share_meeting=0.981, plants_checked=1200, all_stable=True, limits_kept=True, clamped_share=0.0,
        clamped_duration=0.0, trajectory=make_trajectory(rng),
        tried=(Tried("P", -0.8, 0.0, "steady_state_error"), Tried("PI", 0.11, 0.981, "settling_time")), reasons=(),
    )  # fmt: skip


def make_compared(rng: np.random.Generator, label: str, interval: float) -> Compared:
    """A held-out record that agrees."""
    time = np.arange(0.0, 10.0, interval)
    command = np.where(time < 1.0, 0.0, np.where(time < 6.0, 1.5, -0.5))
    predicted = START + follow(command, interval)
    measured = START + follow(command, interval, 12.1, 0.51) + rng.normal(0.0, 0.5, len(time))
    why = "95.1 % of the samples lie in the band; the misfit is near the noise floor"
    return Compared(
        label, time, command + COMMAND, measured, predicted, predicted - 1.3, predicted + 1.3, 0.066, 0.061, 0.951,
        "agrees", why, 0.978,
    )  # fmt: skip


def make_rig(name: str, source: str, files: tuple[str, str]) -> Rig:
    """A rig file with one fitted and one held-out run."""
    signals = {"time": Signal("time_s", "s"), "command": Signal("drive_V", "V"), "response": Signal(source, "mm")}
    specs = tuple(
        RunSpec(Path("/rigs") / file, file, use, "open", "step", "auto", signals)
        for file, use in zip(files, ("fit", "held-out"), strict=True)
    )
    setting = ControllerSetting(T, DELAY)
    return Rig(
        name, Path("/rigs/rig.toml"), "ab" * 32, "V", "mm", signals, specs, LogDialect(), setting,
        Requirements(REQUIREMENTS, STEP), LIMITS,
    )  # fmt: skip


def make_provenance(files: tuple[str, str]) -> dict[str, Any]:
    """As the job writes it."""
    runs = [
        {"file": file, "sha256": "cd" * 32, "window": [None, None], "samples_sha256": "ef" * 32, "use": use}
        for file, use in zip(files, ("fit", "held-out"), strict=True)
    ]
    return {
        "gainwright": "0.1.0", "python": "3.11.2", "created": "2026-11-03T10:00:00+00:00", "runs": runs,
        "rig_file": {"file": "/rigs/rig.toml", "sha256": "ab" * 32}, "packages": {"numpy": "2.4.0"},
    }  # fmt: skip


@pytest.fixture(scope="session")
def make_outcome() -> Callable[..., Outcome]:
    """A function that makes a released outcome; name, source of the response and files may be hostile."""
    return build_outcome


def build_outcome(
    name: str = "flume paddle (made up)",
    source: str = "meas",
    files: tuple[str, str] = ("run_1.csv", "run_2.csv"),
    interval: float = 0.02,
    **changes: Any,
) -> Outcome:
    """A released outcome; `changes` replace its parts."""
    rng = np.random.default_rng(20261103)
    rig = make_rig(name, source, files)
    fit, compared = make_fit(rng, files[0], interval), make_compared(rng, files[1], interval)
    finding = Finding("gap", "4.20 s to 4.26 s", "3 samples", "bridged; the samples are left out of the fit")
    records = tuple(
        Record(spec, Run(spec.shown, run.time, run.command, run.response), "cd" * 32, "ef" * 32, found)
        for spec, run, found in zip(rig.runs, (fit.runs[0], compared), ((finding,), ()), strict=True)
    )
    provenance = make_provenance(files)
    outcome = Outcome(rig, records, fit, make_design(rng), (compared,), "released", (), (), provenance)
    return replace(outcome, **{"ladder": make_ladder(outcome), **changes})


def make_ladder(outcome: Outcome) -> Ladder:
    """The way up to the made-up gains, as the job builds it."""
    fit, rig = outcome.fit, outcome.rig
    return build_ladder(
        outcome.design.gains, fit.plant, fit.plausible, operating_command=COMMAND, operating_response=START,
        noise=fit.noise, requirements=rig.requirements, limits=rig.limits, setting=rig.setting,
    )  # fmt: skip


@pytest.fixture(scope="session")
def made() -> Outcome:
    """A released outcome, made once."""
    return build_outcome()
