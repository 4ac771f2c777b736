"""One job of the campaign: draw a rig, log it, call the program, run what it released on the true rig."""

import json
import os
import subprocess
import sys
from dataclasses import asdict, dataclass, field, replace
from pathlib import Path
from time import perf_counter
from typing import Any

import numpy as np
from true_rig import Log, SheetController, TrueRig

from . import logs
from .achievable import tune
from .asked import Asked, RigFile, draw_asked, write_rig_file
from .excitations import changes_of_test
from .families import Drawn, draw
from .judged import Values, finer, missed, run_law
from .margins import frequencies, sampled_plant

PROGRAM = "import sys; from gainwright.io.commands.main import main; sys.exit(main())"
PYTHON = "CAMPAIGN_PYTHON"  # environment: the interpreter whose gainwright is judged; default this one
PATIENCE = 300.0  # s
STATUS = {0: "released", 3: "held", 2: "refused rig file", 4: "refused log", 1: "fault"}


@dataclass(frozen=True, eq=False)
class Prepared:
    """A rig with its records made, nothing written yet."""

    drawn: Drawn
    asked: Asked
    style: logs.Style
    records: list[tuple[str, str, logs.Record]]  # (file, use, record)
    about: RigFile
    clean: list[Log]
    drift: bool = False  # the response wanders slowly


@dataclass
class Finished:
    """What became of a job; everything JSON can hold."""

    index: int
    seed: int
    family: str
    status: str
    verdict: str
    seconds: float
    making: float
    reasons: list[str] = field(default_factory=list)
    missed: dict[str, float] = field(default_factory=dict)
    asked: dict[str, Any] = field(default_factory=dict)
    true: dict[str, Any] = field(default_factory=dict)
    predicted: dict[str, Any] = field(default_factory=dict)
    fitted: dict[str, Any] = field(default_factory=dict)
    truth: dict[str, Any] = field(default_factory=dict)
    best: dict[str, Any] = field(default_factory=dict)
    released_values: dict[str, Any] = field(default_factory=dict)
    kind: str = ""


def prepare(family: str, generator: np.random.Generator, held_out_rig: Any = None) -> Prepared:
    """Draw a rig and its tests; `held_out_rig`, a function of Drawn, gives the rig of the held-out run."""
    drawn = draw(family, generator)
    style = logs.draw_style(drawn, generator)
    fits, held = (logs.PULSES, logs.HELD_OUT_PULSES) if drawn.integrating else (logs.FIT, logs.HELD_OUT)
    count = int(generator.integers(1, 3))
    sequences = [fits[i] for i in generator.permutation(len(fits))[:count]] + [held[generator.integers(len(held))]]
    drift = generator.random() < 0.3
    rough, clean = replace(drawn.rig, longest_step=min(drawn.rig.longest_step, style.interval)), []
    for k, levels in enumerate(sequences):
        changes, duration = changes_of_test(drawn, levels, style.interval, generator, k < count)
        rig = held_out_rig(rough) if held_out_rig is not None and k == count else rough
        clean.append(logs.record(rig, changes, duration, style.interval, 0.0, 0))
    sensor = logs.draw_sensor(drawn, clean, style.interval, generator)
    if drift:  # a slow wandering about half the size of the noise
        clean = [replace(log, reading=log.reading + _wander(log, sensor.noise, generator)) for log in clean]
    asked = draw_asked(drawn, clean, sensor, generator)
    names = [f"test_{k + 1}.csv" for k in range(count)] + ["check.csv"]
    uses = ["fit"] * count + ["held-out"]
    records = [(n, u, logs.sense(c, sensor, generator)) for n, u, c in zip(names, uses, clean, strict=True)]
    about = RigFile(
        f"campaign rig, {family}", list(zip(names, uses, strict=True)), style, drawn.command_unit, drawn.response_unit,
        operating_point=(drawn.rig.command_rest, drawn.rig.response_rest) if generator.random() < 0.3 else None,
        sensor_range=_sensor_range(drawn, records) if generator.random() < 0.5 else None,
    )  # fmt: skip
    sensed = replace(drawn, rig=replace(drawn.rig, sensor=sensor))
    return Prepared(sensed, asked, style, records, about, clean, drift)


def held_out_again(job: Prepared, rig: TrueRig, generator: np.random.Generator) -> logs.Record:
    """A further held-out record as the job's own is made, of this rig about its own balance."""
    kinds = logs.HELD_OUT_PULSES if job.drawn.integrating else logs.HELD_OUT
    rig = replace(rig, sensor=rig.sensor.quiet())  # the noise comes once, in `sense`
    there = replace(job.drawn, rig=rig)
    changes, duration = logs.profile(there, kinds[generator.integers(len(kinds))], generator)
    rough = replace(rig, longest_step=min(rig.longest_step, job.style.interval))
    clean = logs.record(rough, changes, duration, job.style.interval, 0.0, 0)
    sensor = job.drawn.rig.sensor
    if job.drift:
        clean = replace(clean, reading=clean.reading + _wander(clean, sensor.noise, generator))
    return logs.sense(clean, sensor, generator)


def _wander(log: Log, noise: float, generator: np.random.Generator) -> Any:
    wave = logs.waves(generator, 0.5 * noise, (0.9 * log.time[-1], 0.4 * log.time[-1]))
    return np.array([wave(t) for t in log.time.tolist()])


def _sensor_range(drawn: Drawn, records: list[tuple[str, str, logs.Record]]) -> tuple[float, float]:
    level = drawn.rig.response_rest
    reach = 2.0 * max(float(np.max(np.abs(made.reading - level))) for _, _, made in records)
    digits = int(np.ceil(-np.log10(reach))) + 1
    return float(np.round(level - reach, digits)), float(np.round(level + reach, digits))


def write(folder: Path, job: Prepared) -> Path:
    """The job's folder: its logs and its rig file, whose path is returned."""
    folder.mkdir(parents=True, exist_ok=True)
    for name, _, made in job.records:
        logs.write(folder / name, made, job.style)
    write_rig_file(folder / "rig.toml", job.asked, job.about)
    return folder / "rig.toml"


def call(rig_file: Path) -> tuple[str, float, dict[str, Any] | None, str]:
    """Status, time (s), the sheet if there is one, and what the program said."""
    out = rig_file.parent / "out"
    python = os.environ.get(PYTHON, sys.executable)
    command = [python, "-P", "-c", PROGRAM, "process", str(rig_file), "--out", str(out), "--no-report"]
    began = perf_counter()
    try:
        done = subprocess.run(command, capture_output=True, text=True, timeout=PATIENCE, cwd="/tmp", check=False)
    except subprocess.TimeoutExpired:
        return "too slow", perf_counter() - began, None, f"no answer in {PATIENCE:g} s"
    took = perf_counter() - began
    sheet = out / "gains.json"
    found = json.loads(sheet.read_text(encoding="utf-8")) if sheet.exists() else None
    spoken = [text for text in done.stderr.splitlines() if text.strip() and not text.startswith("[")]  # not progress
    said = ("\n".join(spoken) or done.stdout.strip())[-1500:]
    if done.returncode in (0, 3) and (found is None or found["status"] != STATUS[done.returncode]):
        return f"exit {done.returncode} against its sheet", took, found, said
    return STATUS.get(done.returncode, f"exit {done.returncode}"), took, found, said


def judge_sheet(sheet: dict[str, Any], job: Prepared) -> tuple[Values, dict[str, float]]:
    """The law of a sheet on the true rig: values, and what they break."""
    drawn, asked = job.drawn, job.asked
    frequency = frequencies(drawn.rig, asked.update_interval, 0.02 / asked.settling)
    plant = sampled_plant(drawn.rig, asked.update_interval, asked.computation_delay, frequency)
    controller = SheetController.from_sheet(sheet)
    values = run_law(finer(drawn.rig, asked), controller, asked, plant, frequency)
    return values, missed(asked, values)


def run_job(family: str, seed: int, index: int, folder: Path) -> Finished:
    """The whole of one ordinary job."""
    began = perf_counter()
    job = prepare(family, np.random.default_rng([seed, index]))
    rig_file = write(folder, job)
    making = perf_counter() - began
    status, seconds, sheet, said = call(rig_file)
    done = Finished(index, seed, family, status, "", seconds, making, asked=asdict(job.asked))
    done.truth = {"dead_time": job.drawn.rig.dead_time, "gain": job.drawn.gain, "times": list(job.drawn.times)}
    _read_sheet(done, sheet, said)
    if status == "released" and sheet is not None:
        values, done.missed = judge_sheet(sheet, job)
        done.true = _values(values)
        done.verdict = "released and bad" if done.missed else "released and good"
        return done
    best = tune(job.drawn, job.asked)
    done.best = asdict(best)
    if status not in ("held", "released"):
        done.verdict = f"fault ({status})"
    else:
        done.verdict = "held but achievable" if best.achievable else "rightly held"
    if sheet is not None and (sheet.get("candidate") or {}).get("controller"):
        values, done.missed = judge_sheet(sheet, job)  # the candidate: tells whether it was held for nothing
        done.true = _values(values)
    return done


def _values(values: Values) -> dict[str, Any]:
    return {**values.requirements, **values.limits}


def _read_sheet(done: Finished, sheet: dict[str, Any] | None, said: str) -> None:
    if sheet is None:
        done.reasons = [said]
        return
    done.reasons = list(sheet.get("reasons", []))
    done.predicted = {row["name"]: row["predicted"] for row in sheet.get("requirements", [])}
    plant = sheet.get("plant") or {}
    done.fitted = {k: plant.get(k) for k in ("structure", "numerator", "denominator", "dead_time")}
    part = sheet.get("controller") or (sheet.get("candidate") or {}).get("controller") or {}
    done.fitted["controller"] = part.get("structure")
    done.fitted["closing"] = [(row.get("verdict"), row.get("why")) for row in sheet.get("closing", [])]
