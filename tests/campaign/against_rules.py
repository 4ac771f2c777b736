"""The search against published tuning rules, on random sets that can be met.

`python -P tests/campaign/against_rules.py --sets 100 --kind tight`

Every set is met on the true plant by a controller of the judge's own with each bound tightened by a fifth. The rules
(published_rules.py) are given the very model that the search is given, the hold added to the dead time. Search and
rules are held against the same two things: the stated bounds on the truth, by a simulation of its own (fair_loop.py),
and the share of 1,000 fresh plausible plants that keeps them, by the program's own judge (asked: 95 %).
"""

import argparse
import json
import sys
import time
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parent))

import numpy as np
from fair_loop import Equation, pid_laws, ultimate
from fair_sets import Problem, draw_problem, kept
from gainwright.design.design import design_gains
from gainwright.design.gains import Gains
from gainwright.design.judge import judge_plants
from gainwright.design.requirements import ControllerSetting, Limits, Requirement, Requirements
from gainwright.ident.fitted import Plausible
from gainwright.ident.plant import Plant
from published_rules import (
    Tuning,
    amigo,
    cohen_coon,
    half_rule,
    lambda_pi,
    simc_pi,
    simc_pi_integrating,
    simc_pid_series,
    tyreus_luyben,
    ziegler_nichols_ultimate,
)

ENDLESS = 1e5  # an integrator as a lag, in dead times, for rules that know only lags
FILTER = 8.0  # Td/Tf of the rules' derivative, as in the search
UNLIMITED = Limits(-np.inf, np.inf, np.inf, -np.inf, np.inf, np.inf)


def requirements_of(bounds):
    """The bounds as the program takes them, on a unit step."""
    items = []
    for name, bound in bounds.items():
        band = 0.02 if name == "settling_time" else None
        step = 1.0 if name == "disturbance_peak" else None
        items.append(Requirement(name, float(bound), "at_most", band=band, command_step=step))
    return Requirements(tuple(items), test_step=1.0)


def plausible_of(fit, count, seed):
    """Plants of the fit's own distribution."""
    some = fit.plausible(np.random.default_rng(seed), count)
    plants = tuple(Plant((one.gain,), one.denominator, one.dead_time) for one in some)
    return Plausible(plants, np.zeros(count), np.zeros(count))


def asked_of(problem):
    """Keywords that search and judge share."""
    return {
        "operating_command": 0.0, "operating_response": 0.0, "noise": None,
        "requirements": requirements_of(problem.bounds), "limits": UNLIMITED,
        "setting": ControllerSetting(float(problem.interval)),
    }  # fmt: skip


def searched(problem, seed):
    """The design; the search is given no plant that it is judged on afterwards."""
    model = problem.fit.model
    nominal = Plant((model.gain,), model.denominator, model.dead_time)
    plausible = plausible_of(problem.fit, 1250, [seed, 1])
    return design_gains(nominal, plausible, command_unit="V", response_unit="mm", **asked_of(problem))


def tunings(problem):
    """Every rule that knows this kind of plant: name to gains."""
    model, hold = problem.fit.model, 0.5 * problem.interval
    late = model.dead_time + hold
    found: dict[str, Tuning] = {}
    ku, pu = ultimate(model.plant, problem.interval)
    for structure in ("PI", "PID"):
        found[f"Ziegler-Nichols {structure}"] = ziegler_nichols_ultimate(structure, ku, pu)
    found["Tyreus-Luyben PI"] = tyreus_luyben(ku, pu)
    if model.integrators:
        lag = sum(model.lags) + late  # for rules that know k' exp(-L s)/s
        found["SIMC PI"] = simc_pi_integrating(model.gain, lag)
        pi = simc_pi_integrating(model.gain, late)
        found["SIMC PID"] = ideal(Tuning(pi.gain, pi.integral_time, model.lags[0]))
        one = (model.gain * ENDLESS * lag, ENDLESS * lag, lag)
    else:
        one = (model.gain, *half_rule(model.lags, (), late, 1))
        found["SIMC PI"] = simc_pi(*one)
        two = half_rule(model.lags, (), late, 2) if len(model.lags) > 1 else None
        found["SIMC PID"] = ideal(simc_pid_series(model.gain, *two)) if two else found["SIMC PI"]
        for factor in (1.0, 2.0, 3.0):
            found[f"lambda PI, {factor:g} L"] = lambda_pi(*one, factor * one[2])
    for structure in ("PI", "PID"):
        found[f"AMIGO {structure}"] = amigo(structure, *one)
        found[f"Cohen-Coon {structure}"] = cohen_coon(structure, *one)
    return found


def ideal(series):
    """The ideal form of a series one."""
    share = 1.0 + series.derivative_time / series.integral_time
    return Tuning(series.gain * share, series.integral_time * share, series.derivative_time / share)


def gains_of(tuning, interval):
    """Parallel gains; the derivative filtered as the search does it."""
    integral, derivative = tuning.gain / tuning.integral_time, tuning.gain * tuning.derivative_time
    lag = max(tuning.derivative_time / FILTER, 0.5 * interval) if derivative else 0.0
    return Gains("PID" if derivative else "PI", tuning.gain, integral, derivative, lag)


def equation_of(law):
    """A shipped law as one column of the judge's own simulation."""
    size = max(len(law.command), len(law.setpoint), len(law.response))

    def column(values):
        return np.array([*values, *[0.0] * (size - len(values))])[:, None]

    return Equation(law.update_interval, column(law.command), column(law.setpoint), column(law.response))


def judged(problem, gains, seed):
    """Share of 1,000 fresh plausible plants that keeps everything."""
    fresh = plausible_of(problem.fit, 1000, [seed, 2])
    return judge_plants(gains, fresh, **asked_of(problem)).share_meeting


def one_set(problem: Problem, seed):
    """A row: what search and rules reach on one set."""
    began = time.process_time()
    design = searched(problem, seed)
    row = {
        "family": problem.family,
        "seconds": time.process_time() - began,
        "found": not design.reasons,
        "structure": design.gains.structure,
        "slack": max(each.slack for each in design.tried),
        "truth": kept(problem, equation_of(design.law)),
        "share": judged(problem, design.gains, seed),
        "rules": {},
    }
    for name, tuning in tunings(problem).items():
        gains = gains_of(tuning, problem.interval)
        laws = [np.array([x]) for x in (gains.proportional, gains.integral, gains.derivative, gains.filter_time)]
        good = kept(problem, pid_laws(problem.interval, *laws))
        share = judged(problem, gains, seed) if good else 0.0
        row["rules"][name] = {"truth": good, "share": share}
    return row


def table(rows):
    """Lines of the summary."""
    count = len(rows)

    def per_cent(hits):
        return f"{100.0 * sum(hits) / count:5.1f} %"

    names = sorted({name for row in rows for name in row["rules"]})
    nothing = {"truth": False, "share": 0.0}

    def rule(row, name):
        return row["rules"].get(name, nothing)

    def both(each):
        return each["truth"] and each["share"] >= 0.95

    lines = [f"{'':28}{'on the truth':>14}{'and on 95 % of 1,000 fresh plants':>36}"]
    for name in names:
        each = [rule(row, name) for row in rows]
        lines.append(f"{name:28}{per_cent(x['truth'] for x in each):>14}{per_cent(both(x) for x in each):>36}")
    any_truth = per_cent(any(each["truth"] for each in r["rules"].values()) for r in rows)
    any_both = per_cent(any(both(each) for each in r["rules"].values()) for r in rows)
    lines.append(f"{'best rule, set by set':28}{any_truth:>14}{any_both:>36}")
    lines.append(f"{'search':28}{per_cent(r['truth'] for r in rows):>14}{per_cent(both(r) for r in rows):>36}")
    lines.append(f"found by the search: {per_cent(r['found'] for r in rows)} of {count}")
    good = per_cent(r["found"] and both(r) for r in rows)
    lines.append(f"found, right on the truth and on 95 % of the fresh plants: {good}")
    wrong = sum(r["found"] and not r["truth"] for r in rows)
    lines.append(f"found and wrong on the truth: {wrong}")
    seconds = np.array([r["seconds"] for r in rows])
    lines.append(
        f"CPU seconds a design: median {np.median(seconds):.2f}, 95th percentile {np.quantile(seconds, 0.95):.2f}"
    )
    return lines


def main() -> None:
    """Run the sets, print the misses and the table."""
    ask = argparse.ArgumentParser(description=__doc__)
    ask.add_argument("--sets", type=int, default=100)
    ask.add_argument("--first", type=int, default=0)
    ask.add_argument("--seed", type=int, default=1)
    ask.add_argument("--kind", choices=("tight", "loose"), default="tight")
    ask.add_argument("--lines", type=Path, help="add one JSON line a set here")
    given = ask.parse_args()
    rows, index = [], given.first
    while len(rows) < given.sets:
        problem = draw_problem(given.seed, index, given.kind)
        index += 1
        if problem is None:
            continue
        row = {"index": index - 1, **one_set(problem, index - 1)}
        rows.append(row)
        if given.lines:
            with given.lines.open("a", encoding="utf-8") as file:
                file.write(json.dumps(row, default=float) + "\n")
        if not (row["found"] and row["truth"] and row["share"] >= 0.95):
            print({name: value for name, value in row.items() if name != "rules"}, problem.bounds, flush=True)
    print(f"{given.kind} sets, seed {given.seed}, indices {given.first} to {index - 1}")
    print("\n".join(table(rows)))


if __name__ == "__main__":
    main()
