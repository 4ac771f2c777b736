"""Least-squares fit, starting values and intervals; beside them lmfit with finite differences on two usual models."""

import lmfit
import numpy as np
from gainwright.ident.catalogue import CATALOGUE
from gainwright.ident.condensed import can_condense, condensed
from gainwright.ident.fit import finish
from gainwright.ident.identify import identify
from gainwright.ident.modes import modes_of
from gainwright.ident.polish import polish
from gainwright.ident.regression import Regression
from gainwright.ident.simulate import grid_of, response
from gainwright.ident.start import first_guesses
from gainwright.ident.whiten import WHITE
from measure import Line, once, one_pass, seconds
from records import PLANTS, STARTS, record
from scipy.signal import lsim

FORMULA = {structure.name: structure for structure in CATALOGUE}


def start_of(plant):
    """The common start: log shapes and dead time."""
    return np.array([*np.log(STARTS[plant]), 0.8 * PLANTS[plant].dead_time])


def ours(run, plant):
    """From a run and a start to the end of lmfit on the full model: (theta, coefficients)."""
    every = Regression((run,), FORMULA[plant], run.start_command, True)
    theta = start_of(plant)
    problem = every
    if can_condense(every):
        for reach in (0.5 * theta[-1], 50 * every.interval):
            problem = condensed(every, theta, reach, {})
            theta, solved = polish(problem, theta)
    else:
        theta, solved = polish(problem, theta)
    return finish(problem, theta, solved.coefficients, WHITE)[:2]


def by_differences(run, plant, model):
    """lmfit's finite differences on a unit-gain model(shapes, dead time): (theta, gain, level)."""
    first = start_of(plant)
    parameters = lmfit.Parameters()
    for i, value in enumerate(first[:-1]):
        parameters.add(f"shape_{i}", value=value)
    parameters.add("dead_time", value=first[-1], min=0.0)
    unit = model(np.exp(first[:-1]), first[-1])
    design = np.column_stack([unit, np.ones(len(unit))])
    gain, level = np.linalg.lstsq(design, run.response, rcond=None)[0]
    parameters.add("gain", value=gain)
    parameters.add("level", value=level)

    def residual(trial):
        values = [p.value for p in trial.values()]
        return run.response - values[-1] - values[-2] * model(np.exp(values[:-3]), values[-3])

    found = lmfit.minimize(residual, parameters, epsfcn=1e-8).params
    return np.array([p.value for p in found.values()])


def exact_model(run, plant):
    """Unit-gain response by first-order recursions with an exact fractional dead time."""
    grid = grid_of(run)
    return lambda shapes, late: response(modes_of(*FORMULA[plant].polynomials(tuple(shapes))), grid, max(late, 0.0))


def pade_model(run, plant):
    """Unit-gain response by `scipy.signal.lsim` with a third-order Pade dead time; the command held."""
    signs = np.array([-1.0, 1.0, -1.0, 1.0])

    def model(shapes, late):
        late = max(late, 1e-6)
        below = np.array([late**3, 12 * late**2, 60 * late, 120.0])
        top, bottom = FORMULA[plant].polynomials(tuple(shapes))
        system = (np.polymul(top, below * signs), np.polymul(bottom, below))
        return lsim(system, run.command - run.start_command, run.time, interp=False)[1]

    return model


def fit_lines(quick):
    """Least squares of one structure from a common start."""
    for plant in PLANTS:
        for samples in (10_000,) if quick else (10_000, 100_000, 1_000_000):
            run = record(plant, samples)
            taken = seconds(lambda run=run, plant=plant: ours(run, plant), 3 if quick else 7)
            beside = [("passes of lfilter", taken / one_pass(samples))]
            by_exact = once(lambda run=run, plant=plant: by_differences(run, plant, exact_model(run, plant)))
            beside.append(("differences on an exact model: times longer", by_exact / taken))
            if samples <= (10_000 if quick else 100_000):
                by_pade = once(lambda run=run, plant=plant: by_differences(run, plant, pade_model(run, plant)))
                beside.append(("differences on lsim with Pade: times longer", by_pade / taken))
            yield Line("fit", f"{plant}, {samples:,} samples of six steps", taken, tuple(beside))


def start_lines(quick):
    """First guesses alone, three of each."""
    for name in ("lag", "resonance") if quick else (*PLANTS, "two lags with zero"):
        run = record(name if name in PLANTS else "resonance", 2_000)
        problem = Regression((run,), FORMULA[name], 0.0, True)
        taken = seconds(lambda problem=problem: first_guesses(problem), 3 if quick else 9)
        yield Line("starting values", f"{name}, 2,000 samples", taken, (("passes", taken / one_pass(2_000)),))


def interval_lines(quick):
    """All structures, the noise's colour, intervals and 1,100 plausible plants: the whole of `identify`."""
    for plant in ("lag",) if quick else PLANTS:
        for samples in (2_000,) if quick else (2_000, 10_000, 100_000, 1_000_000):
            for rho in (0.0,) if quick else (0.0, 0.9):
                run = record(plant, samples, rho)
                taken = seconds(lambda run=run: identify([run]), 1 if samples > 100_000 else 3)
                beside = (("passes", taken / one_pass(samples)),)
                yield Line("intervals", f"{plant}, {samples:,} samples, noise {rho:g}", taken, beside)
    if not quick:
        run = record("resonance", 10_000, 0.9, busy=True)
        taken = seconds(lambda: identify([run]), 3)
        beside = (("passes", taken / one_pass(10_000)),)
        yield Line("intervals", "resonance, 10,000 samples, random levels, noise 0.9", taken, beside)
