"""Runs a law on the true rig and says which requirements and limits it keeps."""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from true_rig import SheetController, TrueRig, closed_loop

from .asked import Asked
from .margins import Margins, controller_response, margins
from .metrics import measure_step

AT_LEAST = ("gain_margin", "phase_margin", "damping_ratio")
TOLERANCE = 1e-3  # of the bound: the steps of the true rig are not finer


@dataclass(frozen=True)
class Values:
    """Requirement and limit values on the true rig, base units; by the names of the rig file."""

    requirements: dict[str, float]
    limits: dict[str, float]
    margins: Margins


def finer(rig: TrueRig, asked: Asked) -> TrueRig:
    """The rig with at least five steps an update interval."""
    return replace(rig, longest_step=min(rig.longest_step, asked.update_interval / 5.0))


def run_law(
    rig: TrueRig,
    controller: SheetController,
    asked: Asked,
    plant: NDArray[np.complex128],
    frequency: NDArray[np.float64],
    settlings: float = 6.0,
    before: float = 3.0,
) -> Values:
    """Values of the law on the rig, without sensor noise.

    Parameters
    ----------
    plant, frequency : (m,) arrays
        Sampled response of the true rig, see margins.
    settlings, before : float
        Length of the judged response and of the rest before it, in bounds of the settling time.
    """
    interval, bound = asked.update_interval, asked.settling
    wait = interval * np.ceil(before * bound / interval)
    start = controller.operating_response
    target = start + asked.test_step
    loop = margins(plant * controller_response(controller.equation, frequency))
    disturbed = "disturbance_peak" in asked.bounds
    quiet = wait + settlings * bound
    log = closed_loop(
        rig,
        controller,
        lambda t: target if t >= wait - 1e-6 * interval else start,
        quiet + (2.0 * bound if disturbed else 0.0),
        computation_delay=asked.computation_delay,
        added=(lambda t: asked.command_step if t >= quiet - 1e-6 * interval else 0.0) if disturbed else None,
    )
    inside = (log.fine_time >= wait - 1e-6 * interval) & (log.fine_time <= quiet)
    response = log.fine_response[inside]
    step = measure_step(log.fine_time[inside] - wait, response, target, float(response[0]), asked.band)
    values = {
        "overshoot": step.overshoot,
        "settling_time": step.settling,
        "rise_time": step.rise,
        "steady_state_error": step.error / abs(asked.test_step),
        "gain_margin": loop.gain,
        "phase_margin": loop.phase,
        "peak_sensitivity": loop.sensitivity,
    }
    if disturbed:
        after = log.fine_response[log.fine_time > quiet]
        values["disturbance_peak"] = float(np.max(np.abs(after - response[-1])))
    sent = log.command[log.time >= wait - 1.5 * interval]  # with the one before the step: its jump counts as a rate
    limits = {
        "command lowest": float(sent.min()),
        "command highest": float(sent.max()),
        "command rate": float(np.max(np.abs(np.diff(sent)))) / interval,
        "response lowest": step.lowest,
        "response highest": step.highest,
        "response rate": step.fastest,
    }
    return Values(values, limits, loop)


def tightened(asked: Asked, share: float) -> Asked:
    """Every bound tighter by the share; of a peak sensitivity, what exceeds one."""
    bounds = {}
    for name, bound in asked.bounds.items():
        if name in AT_LEAST:
            bounds[name] = bound * (1.0 + share)
        elif name == "peak_sensitivity":
            bounds[name] = 1.0 + (bound - 1.0) * (1.0 - share)
        else:
            bounds[name] = bound * (1.0 - share)
    return replace(asked, bounds=bounds)


def excess(name: str, value: float, bound: float) -> float:
    """By what share of the bound a requirement is missed; negative when met, infinite when it never happens."""
    if name in AT_LEAST:
        return (bound - value) / bound
    return (value - bound) / bound


def missed(asked: Asked, values: Values) -> dict[str, float]:
    """Requirements and limits that the true rig breaks, with the share of the bound by which it does.

    A limit of the response is broken by its own tolerance of the test step.
    """
    broken = {}
    for name, bound in asked.bounds.items():
        over = excess(name, values.requirements[name], bound)
        if not over <= TOLERANCE:
            broken[name] = over
    return broken | {name: over for name, over in limit_excess(asked, values).items() if not over <= TOLERANCE}


def limit_excess(asked: Asked, values: Values) -> dict[str, float]:
    """By how much each limit is passed: levels as a share of their span or the test step, rates as a share."""
    have, span, step = values.limits, asked.highest - asked.lowest, abs(asked.test_step)
    return {
        "command lowest": (asked.lowest - have["command lowest"]) / span,
        "command highest": (have["command highest"] - asked.highest) / span,
        "command rate": have["command rate"] / asked.rate - 1.0,
        "response lowest": (asked.response_lowest - have["response lowest"]) / step,
        "response highest": (have["response highest"] - asked.response_highest) / step,
        "response rate": have["response rate"] / asked.response_rate - 1.0,
    }
