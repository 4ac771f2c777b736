"""Identification whole: runs in, a plant with honest intervals and its plausible siblings out."""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from .behind_valve import Again, Choice, behind_valve
from .bend import Bend
from .between import Between, settle_between
from .catalogue import CATALOGUE, Structure
from .choose import Fitted, Progress, colour_of, evidence, fit_candidates, name_of, not_ruled_out, refit, steady_fit
from .closed_loop import resting_response
from .ends import interval_ends
from .ensemble import Drawn, draw_structure, internal_draws, operating_commands, plant_of, plausible_plants
from .find_bend import find_bend
from .fit import finish
from .fitted import Candidate, Fit, FittedRun, Noise, Parameter
from .play import Sticking
from .run import FloatArray, Run
from .table_fit import fitted_tables, require_tables, structures_for, table_cautions, weigh
from .tables import Table
from .usable import require_usable
from .whiten import WHITE, Colour

_TIED = 0.03
# Noise with more memory than this is a wandering level to anybody who looks at the record.
_DRIFTING = 0.995
_DRAWS = 1100
_PLANTS = 1100
# A tied structure is drawn more thinly; its draws stand several times where its share asks for more.
_TIED_DRAWS = 192


def identify(
    runs: Sequence[Run],
    *,
    tables: Sequence[Table] = (),
    operating_command: float | None = None,
    operating_response: float | None = None,
    structures: Sequence[Structure] = CATALOGUE,
    seed: int = 0,
    progress: Progress | None = None,
) -> Fit:
    """Fit all structures to the runs jointly and choose.

    Parameters
    ----------
    runs : sequence of Run
        At least one, with a command that moves; none where tables stand in.
    tables : sequence of Table
        Frequency tables to be fitted jointly with the runs; without runs both operating values must be stated.
    operating_command, operating_response : float or None
        As the rig file states them; None: the first run's steady command, and the response it holds; in closed loop the
        response before the setpoint moves, and the command that holds it.
    structures : sequence of Structure
    seed : int
        Of the scrambled draws.

    Returns
    -------
    Fit

    Raises
    ------
    RecordError
        Nothing can be made of the runs: see `require_usable` and `require_tables`.

    Notes
    -----
    Least squares from the best first guesses; the noise's colour by restricted maximum likelihood; every structure
    again under that colour, weighed by the Bayesian information criterion; the chosen one finished by lmfit; the dead
    time profiled, and the plausible plants drawn from the mixture over it.
    """
    if tables:
        require_tables(tables, runs, operating_command, operating_response)
        structures = structures_for(structures, tables, runs)
    if runs or not tables:
        require_usable(runs)
    runs, between = settle_between(runs) if runs else ((), Between("held"))
    reference = runs[0].start_command if operating_command is None else operating_command
    operating_response = resting_response(runs) if operating_response is None and runs else operating_response
    fixed = operating_command is not None
    weighed = weigh(tables, runs, reference, fixed, structures) if tables else ()

    def choose(through: Sequence[Run], further: bool) -> Choice:
        usual = [s for s in structures if not s.further]
        allowed = structures if further or not usual else usual
        fitted, colour = fit_candidates(through, reference, fixed, allowed, progress, weighed)
        chosen, own = _finished(fitted[0], colour)
        return Choice([chosen, *fitted[1:]], not_ruled_out(fitted, colour), own)

    choice, bend, sticking = (choose(runs, True), None, None) if tables else _behind_actuator(runs, choose)
    fitted, weights, colour = choice.fitted, choice.weights, choice.colour
    fitted = [fitted[0], *(f if fitted[0].whitened else steady_fit(f) for f in fitted[1:])]
    if progress:
        progress("drawing plausible plants", 0.8)
    kept = [i for i in range(len(fitted)) if i == 0 or weights[i] >= _TIED]
    drawn = [draw_structure(fitted[i], colour, _DRAWS if i == 0 else _TIED_DRAWS, seed) for i in kept]
    drawn = [replace(d, draws=between.spread(d.draws, len(d.fitted.theta) - 1)) for d in drawn]
    found = _assembled(fitted, weights, drawn, weights[kept], colour, operating_response, between)
    if bend is not None or sticking is not None:  # the commands as they were logged
        logged = tuple(replace(each, command=run.command) for each, run in zip(found.runs, runs, strict=True))
        found = replace(found, runs=logged, bend=bend)
    if sticking is None:
        return found
    valves = sticking.draws(len(found.plausible.plants), seed)  # in front of each plausible plant
    return replace(found, plausible=replace(found.plausible, valves=valves), sticking=sticking)


def _behind_actuator(runs: Sequence[Run], choose: Again) -> tuple[Choice, Bend | None, Sticking | None]:
    """The choice behind the curve and the valve that the records show, and both; None where they show none."""
    choice = choose(runs, True)
    bend = find_bend(choice.fitted[0], choice.colour)
    if bend is not None:
        runs = tuple(bend.through(run) for run in runs)
        choice = choose(runs, True)
    choice, sticking = behind_valve(runs, choice, choose)
    return choice, bend, sticking


def _finished(best: Fitted, colour: Colour) -> tuple[Fitted, Colour]:
    """The chosen structure ended by lmfit on the full model, and its noise once more."""
    kept = steady_fit(best)
    working = colour if kept.whitened else WHITE
    theta = finish(kept.problem, kept.theta, kept.solved.coefficients, working)[0]
    solved = kept.problem.solve(theta, working)
    ended = replace(kept, theta=theta, solved=solved) if solved.cost <= kept.solved.cost else kept
    colour = colour_of(ended, colour)
    return (refit(ended, colour) if ended.whitened else ended), colour


def _assembled(
    fitted: list[Fitted],
    weights: FloatArray,
    drawn: list[Drawn],
    shares: FloatArray,
    colour: Colour,
    operating_response: float | None,
    between: Between,
) -> Fit:
    chosen = fitted[0]
    problem = chosen.problem
    s = len(chosen.theta) - 1
    row = np.concatenate([chosen.theta, chosen.solved.coefficients])
    levels = row[s + 2 : s + 2 + len(problem.runs)]
    response_there = float(levels[0]) if operating_response is None else operating_response
    parameters, covariance = _parameters(drawn[0], row)
    commands = operating_commands(drawn[0], response_there)
    noise = _noise(chosen, colour)
    told = evidence(fitted)
    candidates = tuple(
        Candidate(f.name, f.misfit, f.criterion, float(w), _note(i, float(w), float(share)))
        for i, (f, w, share) in enumerate(zip(fitted, told, weights, strict=True))
    )
    ties = tuple(f.name for f, w in zip(fitted[1:], told[1:], strict=True) if w >= _TIED) + _equal_lags(drawn[0])
    return Fit(
        structure=chosen.name,
        plant=plant_of(chosen, row),
        parameters=parameters,
        covariance=covariance,
        operating_command=_operating_command(chosen, row, response_there),
        operating_response=response_there,
        operating_command_interval=(float(np.quantile(commands, 0.025)), float(np.quantile(commands, 0.975))),
        noise=noise,
        runs=_fitted_runs(chosen, row),
        misfit=chosen.misfit,
        candidates=candidates,
        ties=ties,
        plausible=plausible_plants(drawn, shares, response_there, _PLANTS),
        explanation=_explanation(candidates, ties, between.words),
        cautions=(*_cautions(drawn[0], colour), *table_cautions(chosen)),
        drift=colour.rho > _DRIFTING or colour.wander > 0.0,
        draws=internal_draws(drawn[0]),
        between=problem.runs[0].between if problem.runs else "held",
        tables=fitted_tables(chosen, row),
        friction=(float(np.exp(row[s - 2])), float(np.exp(row[s - 1]))) if problem.structure.friction else (0.0, 0.0),
    )


def _operating_command(chosen: Fitted, row: FloatArray, operating_response: float) -> float:
    single = Drawn(chosen, row[None, :])
    return float(operating_commands(single, operating_response)[0])


def _parameters(drawn: Drawn, row: FloatArray) -> tuple[tuple[Parameter, ...], FloatArray]:
    structure = drawn.fitted.problem.structure
    named = _named(drawn.fitted)
    s = len(drawn.fitted.theta) - 1

    def natural(rows: FloatArray) -> FloatArray:
        shapes = np.exp(rows[:, :s])
        values = np.array([named.values(tuple(shape)) for shape in shapes]).reshape(len(rows), -1)
        zeros = [rows[:, s + 1 + drawn.fitted.problem.zero_at] / rows[:, s + 1]] if structure.zero else []
        return np.column_stack([rows[:, s + 1], rows[:, s], values, *zeros])

    draws = natural(drawn.draws)
    best = natural(row[None, :])[0]
    labels = [("gain", ("gain", "gain/s", "gain/s^2")[structure.integrators]), ("dead time", "s")]
    labels += [(n.name, n.unit) for n in named.parameters]
    least = np.array([drawn.fitted.problem.soonest if name == "dead time" else -np.inf for name, _ in labels])
    low, high = np.array([interval_ends(*each) for each in zip(draws.T, best, least, strict=True)]).T
    covariance = np.atleast_2d(np.cov(draws.T))
    errors = np.sqrt(np.diag(covariance))
    parameters = tuple(
        Parameter(name, float(v), unit, float(e), float(a), float(b))
        for (name, unit), v, e, a, b in zip(labels, best, errors, low, high, strict=True)
    )
    return parameters, covariance


def _named(fitted: Fitted) -> Structure:
    name = name_of(fitted.problem.structure, fitted.theta)
    return next((s for s in CATALOGUE if s.name == name), fitted.problem.structure)


def _noise(chosen: Fitted, colour: Colour) -> Noise:
    problem = chosen.problem
    if not problem.runs:
        return Noise(1.0, 0.0, 0.0)
    n = len(problem.measured)
    unknowns = len(chosen.theta) + len(chosen.solved.coefficients)
    plain = problem.solve(chosen.theta, WHITE)
    left = problem.target_under(colour) - problem.at(chosen.theta).columns_under(colour) @ plain.coefficients
    white = float(np.sqrt(np.sum(left**2) / max(n - unknowns, 1)))
    std = float(np.sqrt(plain.cost / max(n - unknowns, 1)))
    return Noise(problem.interval, std, white, colour.rho, colour.c)


def _fitted_runs(chosen: Fitted, row: FloatArray) -> tuple[FittedRun, ...]:
    problem = chosen.problem
    s = len(chosen.theta) - 1
    model = problem.model(chosen.theta, row[s + 1 :])
    out = []
    for i, (run, part) in enumerate(zip(problem.runs, problem.parts, strict=True)):
        whole = model[part]
        if len(whole) < len(run.time):
            whole = np.full(len(run.time), np.nan)
            whole[run.valid] = model[part]
        out.append(FittedRun(run.label, run.time, run.command, run.response, whole, float(row[s + 2 + i])))
    return tuple(out)


def _equal_lags(drawn: Drawn) -> tuple[str, ...]:
    name = drawn.fitted.name
    other = {"resonance": "two lags", "two lags": "resonance"}
    other |= {f"{one} with zero": f"{two} with zero" for one, two in other.items()}
    if name not in other:
        return ()
    low, high = np.quantile(drawn.draws[:, 1], [0.025, 0.975])
    return (other[name],) if low < 0 < high else ()


def _note(place: int, weight: float, share: float) -> str:
    if place == 0:
        return "chosen"
    if weight >= _TIED:
        return "tied: the records can't tell it apart"
    return "less supported, yet not ruled out: plausible plants are of it too" if share >= _TIED else "less supported"


def _explanation(candidates: tuple[Candidate, ...], ties: tuple[str, ...], between: str) -> str:
    best = candidates[0]
    text = f"{best.structure}: residual {100 * best.misfit:.2g} % of the response's standard deviation"
    if len(candidates) > 1:
        second = candidates[1]
        text += f"; next best {second.structure} ({100 * second.misfit:.2g} %), criterion worse by "
        text += f"{second.criterion - best.criterion:.0f}"
    if ties:
        text += f"; the records can't tell it apart from: {', '.join(ties)}"
    return text + (f"; {between}" if between else "")


def _cautions(drawn: Drawn, colour: Colour) -> tuple[str, ...]:
    out = []
    s = len(drawn.fitted.theta) - 1
    dead_time = drawn.draws[:, s]
    low, most = interval_ends(dead_time, float(drawn.fitted.theta[s]), drawn.fitted.problem.soonest)
    if low <= 1e-3 * drawn.fitted.problem.interval:
        out.append(f"the records leave open whether there is a dead time at all (95 %: up to {most:.3g} s)")
    if colour.rho > _DRIFTING or colour.wander > 0.0:
        out.append("the response wanders slowly by itself (drift): levels and gain are less certain than they look")
    return tuple(out)
