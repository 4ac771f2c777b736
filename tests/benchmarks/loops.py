"""The locus of 300 gains, a gain set, and a thousand plants under one sampled law beside a loop over samples."""

import numpy as np
from gainwright.design.discretise import columns_of, law_columns
from gainwright.design.gain_sets import fitted_sets
from gainwright.design.gains import Gains
from gainwright.design.locus.branches import locus_branches
from gainwright.design.locus.loop import OpenLoop
from gainwright.design.locus.roots import closed_loop_roots
from gainwright.design.requirements import ControllerSetting, Limits, Requirement, Requirements
from gainwright.design.sampled.bank import build_bank
from gainwright.design.sampled.loop import Clamps, simulate
from gainwright.design.situation import situation_of
from gainwright.design.values import bench_of
from gainwright.ident.fitted import Plausible
from gainwright.ident.plant import Plant
from measure import Line, once, seconds

INTERVAL = 0.02
SERVO = OpenLoop((3.0, 6.0), (1.0, 5.0, 9.0, 5.0, 0.0), 0.2, 0.05)


def locus_lines(quick):
    """Branches of a servo with dead time and hold, beside the roots found anew at each gain."""
    gains = np.geomspace(0.01, 20.0, 30 if quick else 300)
    taken = seconds(lambda: locus_branches(SERVO, gains, -15.0), 3)
    anew = once(lambda: [closed_loop_roots(SERVO, float(gain), -15.0) for gain in gains])
    yield Line("locus", f"{len(gains)} gains", taken, (("roots anew at each gain: times longer", anew / taken),))


def set_lines(quick):
    """The set of loop gains of a PI for margins alone, and with overshoot and settling time."""
    margins = (Requirement("gain_margin", 6.0, "at_least"), Requirement("phase_margin", 45.0, "at_least"))
    times = (Requirement("overshoot", 0.1, "at_most"), Requirement("settling_time", 3.0, "at_most", band=0.02))
    for name, items in (
        (("margins", margins),) if quick else (("margins", margins), ("margins and times", margins + times))
    ):
        situation = situation_of(
            operating_command=0.0,
            operating_response=0.0,
            noise=None,
            requirements=Requirements(items, test_step=1.0),
            limits=Limits(),
            setting=ControllerSetting(INTERVAL),
        ).without_floors()
        alone = Plausible((Plant((2.0,), (0.5, 1.0), 0.1),), np.zeros(1), np.zeros(1))
        bench = bench_of(alone, situation, 15.0, points=20)
        columns = columns_of([Gains("PI", 0.5, 1.0)])
        yield Line("gain sets", name, seconds(lambda b=bench, c=columns: fitted_sets(b, c, 1.0), 3))


def ensemble(plants, samples):
    """A call that runs so many plants under a PI law, bounds on the command."""
    rng = np.random.default_rng(2)
    many = [Plant((g,), (t, 1.0), late) for g, t, late in rng.uniform([1.8, 0.4, 0.05], [2.2, 0.6, 0.15], (plants, 3))]
    bank = build_bank(many, INTERVAL, computation_delay=0.003)
    law = law_columns(columns_of([Gains("PI", 0.5, 1.0)] * plants), INTERVAL)
    clamps = Clamps(np.full(plants, -3.0), np.full(plants, 3.0))
    where, one = np.arange(plants), np.ones(plants)
    call = lambda: simulate(bank, where, law, setpoint=one, disturbance=0 * one, clamps=clamps, samples=samples)  # noqa: E731
    return call, many


def looped(plants, samples):
    """The same by hand, a plant and a sample at a time; the dead time rounded to samples, which costs nothing."""
    for plant in plants:
        lag, gain = plant.denominator[0], plant.numerator[0]
        decay = float(np.exp(-INTERVAL / lag))
        late = round(plant.dead_time / INTERVAL)
        sent, response, total = [0.0] * (samples + late), 0.0, 0.0
        for k in range(samples):
            error = 1.0 - response
            total += 1.0 * INTERVAL * error
            sent[k + late] = min(max(0.5 * error + total, -3.0), 3.0)
            response = decay * response + gain * (1.0 - decay) * sent[k]


def ensemble_lines(quick):
    """A thousand plants, two thousand samples."""
    plants, samples = (100, 200) if quick else (1_000, 2_000)
    call, many = ensemble(plants, samples)
    taken = seconds(call, 3)
    by_hand = once(lambda: looped(many[:50], samples)) * plants / 50
    what = f"{plants:,} plants, {samples:,} samples"
    yield Line("sampled ensemble", what, taken, (("a Python loop over samples: times longer", by_hand / taken),))
