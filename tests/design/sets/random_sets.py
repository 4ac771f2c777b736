"""Random loops with random requirements, their gain sets, and the gains at which a dense look disagrees with them."""

from dataclasses import dataclass

import numpy as np
from dense_loop import SUB, Case, curve, is_stable, margins, run
from gainwright.design.discretise import columns_of
from gainwright.design.gain_sets import fitted_sets
from gainwright.design.gains import Gains
from gainwright.design.requirements import ControllerSetting, Limits, Requirement, Requirements
from gainwright.design.situation import situation_of
from gainwright.design.values import bench_of
from gainwright.ident.fitted import Plausible
from gainwright.ident.plant import Plant

SETTLE, DENSE = 300, 240  # samples of a run; gains that are looked at
NEAR = 2e-3  # relative distance of a dense value from its bound that is left undecided


@dataclass(frozen=True)
class Looked:
    """What one random set gave.

    Attributes
    ----------
    intervals : number of intervals in which all hold
    wrong : list of (requirement or "together", gain)
    several : whether some row or the whole has more than one interval
    """

    intervals: int
    wrong: list[tuple[str, float]]
    several: bool


def draw_case(rng):
    """A lag, two lags, a resonance, an integrator with lag, an unstable lag, or a double integrator with a zero."""
    kind = rng.integers(6)
    t, late = 1.0, int(rng.integers(0, 60))
    interval = float(10 ** rng.uniform(-1.6, -0.9))
    reset = float(10 ** rng.uniform(-1.5, 0.5)) if rng.random() < 0.6 else 0.0
    gain = float(rng.uniform(0.5, 3.0))
    if kind == 0:
        bottom = (t, 1.0)
    elif kind == 1:
        bottom = (0.5 * t, t + 0.5, 1.0)
    elif kind == 2:
        bottom = (t * t, 2.0 * float(rng.uniform(0.05, 0.5)) * t, 1.0)
    elif kind == 3:
        bottom, reset = (t, 1.0, 0.0), 0.1 * reset
    elif kind == 4:
        bottom, late, reset = (t, -1.0), late // 8, 0.5 * reset
    else:
        return Case((gain, 0.4 * gain), (1.0, 0.0, 0.0), late // 6, interval, 0.05 * reset)
    return Case((gain,), bottom, late, interval, reset)


def stable_gains(case):
    """Dense gains, and which of them are stable by eigenvalues."""
    gains = np.geomspace(2e-3, 60.0, DENSE)
    return gains, np.array([is_stable(case, k) for k in gains])


def values_at(case, gains, w, value):
    """Dense values by requirement name at stable gains."""
    response = run(case, gains, SETTLE)
    final = final_of(case, gains)
    share = response / final
    spacing = case.interval / SUB
    outside = np.abs(share - 1.0) > 0.02
    last = outside.shape[0] - outside[::-1].argmax(axis=0)
    settled = np.where(outside[-1], np.inf, np.where(outside.any(axis=0), last * spacing, 0.0))
    up = [
        np.where((share >= level).any(axis=0), (share >= level).argmax(axis=0) * spacing, np.inf)
        for level in (0.1, 0.9)
    ]
    pushed = np.abs(run(case, gains, SETTLE, 0.0, 1.0))
    decibel, degrees, peak = margins(case, gains, w, value)
    return {
        "overshoot": np.maximum(share.max(axis=0) - 1.0, 0.0),
        "settling_time": settled,
        "rise_time": up[1] - np.where(np.isfinite(up[0]), up[0], 0.0),
        "disturbance_peak": pushed.max(axis=0),
        "gain_margin": decibel,
        "phase_margin": degrees,
        "peak_sensitivity": peak,
    }


def final_of(case, gains):
    """Where the step ends: 1 with an integral or an integrating plant, else K g/(1 + K g)."""
    if case.reset or case.denominator[-1] == 0.0:
        return np.ones(gains.size)
    loop = case.sign * gains * case.numerator[-1] / case.denominator[-1]
    return loop / (1.0 + loop)


def draw_requirements(rng, case, values):
    """One to four bounds, each at the value that some of the stable gains have."""
    names = rng.permutation(list(values))[: rng.integers(1, 5)]
    items = []
    for name in names:
        known = values[name][np.isfinite(values[name])]
        if not known.size:
            continue
        limit = float(np.quantile(known, rng.uniform(0.2, 0.8)))
        limit = max(limit, 1.05) if name == "peak_sensitivity" else max(limit, 1e-3)
        if name in ("settling_time", "rise_time"):  # a run is watched over five of them at least
            limit = min(limit, 0.2 * SETTLE * case.interval)
        sense = "at_least" if name.endswith("margin") else "at_most"
        step = 1.0 if name.startswith("disturbance") else None
        items.append(
            Requirement(str(name), limit, sense, band=0.02 if name == "settling_time" else None, command_step=step)
        )
    return tuple(items)


def sets_of(case, items):
    """The program's sets, zeros fixed, K = P."""
    plant = Plant(case.numerator, case.denominator, case.late * case.interval / SUB)
    requirements = Requirements(items, test_step=1.0)
    situation = situation_of(
        operating_command=0.0, operating_response=0.0, noise=None, requirements=requirements, limits=Limits(),
        setting=ControllerSetting(case.interval),
    ).without_floors()  # fmt: skip
    alone = Plausible((plant,), np.zeros(1), np.zeros(1))
    points = max(2, 20_000 // SETTLE)
    bench = bench_of(alone, situation, (SETTLE - 1) * case.interval, points=min(points, 64))
    gains = Gains("PI" if case.reset else "P", case.sign, case.sign * case.reset)
    return fitted_sets(bench, columns_of([gains]), 1.0)


def look(seed):
    """One random set; None where no gain of this loop is stable."""
    rng = np.random.default_rng([41, seed])
    case = draw_case(rng)
    gains, stable = stable_gains(case)
    if stable.sum() < 8:
        return None
    top = np.pi / case.interval
    w = np.unique(np.concatenate([np.geomspace(1e-7, top, 5000), np.linspace(1e-3, top, 4000)]))
    value = curve(case, w)
    found = values_at(case, gains[stable], w, value)
    items = draw_requirements(rng, case, found)
    if not items:
        return None
    sets = sets_of(case, items)
    values = {name: np.full(gains.size, np.nan) for name in found}
    for name, column in found.items():
        values[name][stable] = column
    rows = dict(sets.rows)
    wrong, sure, every = [], np.ones(gains.size, bool), stable.copy()
    for item in items:
        column = values[item.name]
        with np.errstate(invalid="ignore"):
            good = stable & ((column <= item.limit) if item.sense == "at_most" else (column >= item.limit))
            known = ~stable | ~(np.abs(column - item.limit) <= max(NEAR * abs(item.limit), slip(case, item)))
        wrong += [(item.name, float(k)) for k in gains[known & (good != inside(rows[item.name], gains))]]
        sure &= known
        every &= good
    wrong += [("together", float(k)) for k in gains[sure & (every != inside(sets.together, gains))]]
    several = len(sets.together) > 1 or any(len(spans) > 1 for spans in rows.values())
    return Looked(len(sets.together), wrong, several)


def slip(case, item):
    """What the dense reading itself may be off: a sub-step in time, 1e-3 in the sweep's dB and deg."""
    if item.name.endswith("time"):
        return 2.0 * case.interval / SUB
    return 0.02 if item.name.endswith("margin") else 1e-3


def inside(spans, gains):
    """Which gains lie in one of the intervals; those within 1e-4 of an edge count as they do in the set."""
    held = np.zeros(gains.size, bool)
    for low, high in spans:
        held |= (gains > low) & (gains < (np.inf if high is None else high))
    return held
