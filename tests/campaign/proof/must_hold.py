"""Jobs that must not be released, whatever the gains: the record or the wish is wrong."""

from collections.abc import Callable
from dataclasses import asdict, replace
from pathlib import Path
from time import perf_counter

import numpy as np
from true_rig import TrueRig
from true_rig.linear_stages import Gain, Resonance

from .families import FAMILIES
from .job import Finished, Prepared, call, prepare, write
from .logs import Record

ANY = tuple(FAMILIES)


def _other_gain(rig: TrueRig, factor: float) -> TrueRig:
    return replace(rig, stages=tuple(_scaled(s, factor) if isinstance(s, Gain) else s for s in rig.stages))


def _scaled(stage: Gain, factor: float) -> Gain:
    return Gain(stage.gain * factor, stage.balance, stage.bend)


def gain_changed(generator: np.random.Generator) -> Prepared:
    """Held-out run after the gain rose by half to double."""
    factor = generator.uniform(1.5, 2.0)
    family = ANY[generator.integers(len(ANY))]
    return prepare(family, generator, lambda rig: _other_gain(rig, factor))


def dead_time_doubled(generator: np.random.Generator) -> Prepared:
    """Held-out run after the dead time doubled, on a rig where the dead time matters."""
    while True:
        job = prepare("lag with dead time", generator, lambda rig: replace(rig, dead_time=2.0 * rig.dead_time))
        if job.drawn.rig.dead_time > 0.25 * job.drawn.times[0]:
            return job


def frequency_fell(generator: np.random.Generator) -> Prepared:
    """Held-out run after the natural frequency fell by a tenth."""

    def lower(rig: TrueRig) -> TrueRig:
        stages = [Resonance(0.9 * s.frequency, s.damping) if isinstance(s, Resonance) else s for s in rig.stages]
        return replace(rig, stages=tuple(stages))

    return prepare("resonance", generator, lower)


def _altered(job: Prepared, change: Callable[[str, str, Record], Record]) -> Prepared:
    return replace(job, records=[(name, use, change(name, use, made)) for name, use, made in job.records])


def sensor_clipped(generator: np.random.Generator) -> Prepared:
    """The sensor ends at 55 % of the test's excursion; half of the rig files state its range."""
    job = prepare(ANY[generator.integers(len(ANY))], generator)
    level = job.drawn.rig.response_rest
    top = level + 0.55 * max(float(np.max(made.reading)) - level for _, _, made in job.records)
    bottom = level + 0.55 * min(float(np.min(made.reading)) - level for _, _, made in job.records)
    about = replace(job.about, sensor_range=(bottom, top) if generator.random() < 0.5 else None)
    return _altered(
        replace(job, about=about), lambda n, u, made: replace(made, reading=np.clip(made.reading, bottom, top))
    )


def response_dead(generator: np.random.Generator) -> Prepared:
    """The sensor shows its resting value with its noise, or nothing but one value, in the fit runs."""
    job = prepare(ANY[generator.integers(len(ANY))], generator)
    noise = job.drawn.rig.sensor.noise if generator.random() < 0.5 else 0.0
    level = job.drawn.rig.response_rest

    def dead(name: str, use: str, made: Record) -> Record:
        return replace(made, reading=level + noise * generator.standard_normal(len(made.time)))

    return _altered(job, dead)


def command_idle(generator: np.random.Generator) -> Prepared:
    """Nobody moved the command in the fit runs: the response shows noise and a slow wandering."""
    job = prepare(ANY[generator.integers(len(ANY))], generator)
    rest, level, noise = job.drawn.rig.command_rest, job.drawn.rig.response_rest, job.drawn.rig.sensor.noise

    def idle(name: str, use: str, made: Record) -> Record:
        if use != "fit":
            return made
        wander = 2.0 * noise * np.sin(2.0 * np.pi * made.time / made.time[-1])
        reading = level + wander + noise * generator.standard_normal(len(made.time))
        return Record(made.time, np.full(len(made.time), rest), reading)

    return _altered(job, idle)


def faster_than_dead_time(generator: np.random.Generator) -> Prepared:
    """Settling is asked in less than the dead time."""
    while True:
        job = prepare("lag with dead time", generator)
        if job.drawn.rig.dead_time > 0.2 * job.drawn.times[0]:
            break
    settling = float(f"{0.8 * job.drawn.rig.dead_time:.3g}")
    bounds = {k: v for k, v in job.asked.bounds.items() if k not in ("rise_time", "disturbance_peak")}
    interval = float(f"{settling / 10.0:.2g}")
    return replace(
        job,
        asked=replace(
            job.asked, bounds={**bounds, "settling_time": settling}, update_interval=interval, computation_delay=0.0
        ),
    )


def limits_too_tight(generator: np.random.Generator) -> Prepared:
    """The test step leads past a limit of the response, or needs more command than there is."""
    job = prepare(("lag with dead time", "two lags")[generator.integers(2)], generator)
    level, rest, step = job.drawn.rig.response_rest, job.drawn.rig.command_rest, job.asked.test_step
    if generator.random() < 0.5:
        edge = level + 0.8 * step
        low, high = (-np.inf, edge) if step > 0 else (edge, np.inf)
        asked = replace(job.asked, response_lowest=low, response_highest=high)
    else:
        need = 0.7 * abs(step / job.drawn.gain)
        asked = replace(job.asked, lowest=rest - need, highest=rest + need)
    return replace(job, asked=asked)


def held_out_copied(generator: np.random.Generator) -> Prepared:
    """The held-out file is a fit run under another name."""
    job = prepare(ANY[generator.integers(len(ANY))], generator)
    first = job.records[0][2]
    return _altered(job, lambda name, use, made: first if use == "held-out" else made)


KINDS: dict[str, Callable[[np.random.Generator], Prepared]] = {
    "gain changed before the held-out run": gain_changed,
    "dead time doubled before the held-out run": dead_time_doubled,
    "frequency a tenth lower in the held-out run": frequency_fell,
    "sensor clipped": sensor_clipped,
    "response dead": response_dead,
    "command never moves": command_idle,
    "settling asked faster than the dead time": faster_than_dead_time,
    "limits too tight for the test step": limits_too_tight,
    "held-out copied from a fit run": held_out_copied,
}


def run_must_hold(kind: str, seed: int, index: int, folder: Path) -> Finished:
    """One job that must end held, or with its log or rig file refused."""
    began = perf_counter()
    job = KINDS[kind](np.random.default_rng([seed, 10_000 + index]))
    rig_file = write(folder, job)
    making = perf_counter() - began
    status, seconds, sheet, said = call(rig_file)
    done = Finished(index, seed, job.drawn.family, status, "", seconds, making, asked=asdict(job.asked), kind=kind)
    done.reasons = list(sheet["reasons"]) if sheet is not None else [said]
    right = status in ("held", "refused log", "refused rig file")
    done.verdict = "wrongly released" if status == "released" else "kept back" if right else f"fault ({status})"
    return done
