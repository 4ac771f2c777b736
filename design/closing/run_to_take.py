"""The held-out run to take where one could not be compared: amplitude, length, rest, and what not to do."""

import numpy as np

from ...ident.fitted import Fit
from ...ident.run import Run
from ..requirements import Limits
from .words import Units, with_unit

_ROOM = 0.8  # of the way to a limit: a test must not reach it
_SETTLED = 4.0  # slowest times after which a plant has settled within 2 % (e^-4: exact law of one lag)
_LIGHT = 0.4  # damping ratio under which a mode must not be dwelt on
_LARGER = 2.0  # where nothing else is known: twice the steps of the run at hand
_LONGEST = 16.0  # times the run at hand: no advice beyond


def run_to_take(run: Run, fit: Fit, limits: Limits, units: Units, lacking: float = 0.0) -> str:
    """In one sentence, inside the limits.

    Parameters
    ----------
    lacking : float
        By what factor this run sees too little; 0: unknown.

    Notes
    -----
    What a run leaves open falls with the size of its steps and with the root of its length. The steps are made larger
    as far as the limits let them; what is still lacking must come from more of them.
    """
    factor = max(lacking, 1.0) if lacking > 0.0 else _LARGER
    moved = max(float(np.max(np.abs(run.command - run.start_command))), 0.0)
    held = _hold(run, fit)
    most = _most(fit, limits, held)
    wanted = factor * moved if moved > 0.0 else _first(fit, run)
    size = min(wanted, most)
    shortfall = wanted / size if size > 0.0 else factor
    steps = int(np.ceil(min(max(4.0 * shortfall**2, 4.0), 4.0 * _LONGEST)))
    both = "pulses either way that give back what they took" if fit.plant.integrators else "steps either way"
    told = with_unit(size, units.command)
    parts = [
        f"take a run with {steps} {both} of {told} from {_rest(fit, units)}, each held for {held:.3g} s, at rest for "
        f"{held:.3g} s before the first and after the last ({(steps + 2) * held:.3g} s in all)"
    ]
    if size < wanted:
        parts.append("the limits allow no larger ones")
    if limits.command_rate is not None and np.isfinite(limits.command_rate):
        parts.append(f"the command no faster than {with_unit(limits.command_rate, _per_second(units.command))}")
    light = [pole for pole in fit.plant.poles[fit.plant.poles.imag > 0] if -pole.real < _LIGHT * abs(pole)]
    parts += [f"never dwell at {abs(pole):.3g} rad/s, where the plant resonates" for pole in light]
    return "; ".join(parts)


def _per_second(unit: str) -> str:
    return f"{unit}/s" if unit and unit != "1" else "1/s"


def _rest(fit: Fit, units: Units) -> str:
    return with_unit(fit.operating_command, units.command)


def _hold(run: Run, fit: Fit) -> float:
    """How long a step must be held for the response to show all of it, s."""
    moving = fit.plant.poles[np.abs(fit.plant.poles) > 0]
    slowest = float(np.max(1.0 / np.maximum(np.abs(moving.real), 1e-12), initial=0.0)) if moving.size else 0.0
    interval = float(np.median(np.diff(run.time)))
    return float(max(_SETTLED * slowest + fit.plant.dead_time, 20.0 * interval))


def _most(fit: Fit, limits: Limits, held: float) -> float:
    """Largest step either way that keeps its distance from every limit of command and response."""
    moves = abs(fit.plant.static_gain) * (held if fit.plant.integrators else 1.0) * _peak(fit)
    command = [limits.command_lowest, limits.command_highest]
    response = [limits.response_lowest, limits.response_highest]
    room = [abs(bound - fit.operating_command) for bound in command if bound is not None]
    room += [abs(bound - fit.operating_response) / max(moves, 1e-300) for bound in response if bound is not None]
    return _ROOM * float(min(room, default=np.inf))


def _peak(fit: Fit) -> float:
    """How far a step overshoots in open loop: 1 + exp(-pi z / sqrt(1 - z^2)) of the lightest mode (exact law)."""
    swinging = fit.plant.poles[fit.plant.poles.imag > 0]
    if not swinging.size:
        return 1.0
    ratio = float(np.min(-swinging.real / np.abs(swinging)))
    return 1.0 + float(np.exp(-np.pi * max(ratio, 0.0) / np.sqrt(max(1.0 - ratio**2, 1e-12))))


def _first(fit: Fit, run: Run) -> float:
    """A step that moves the response by twenty times its noise."""
    gain = abs(fit.plant.static_gain) * (_hold(run, fit) if fit.plant.integrators else 1.0)
    return 20.0 * fit.noise.std / max(gain, 1e-300)
