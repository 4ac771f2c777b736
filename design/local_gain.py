"""A plant whose gain differs along the command, where the gains will use it: plants of every gain on the way."""

from dataclasses import replace

import numpy as np
from scipy.stats import norm

from ..ident.bend import Bend, slope_at
from ..ident.fitted import Fit, Plausible
from .requirements import Requirements

# Steps of two sequences that fill the unit interval evenly however many of their members are taken, from the golden
# ratio and the plastic number (Weyl; from memory).
_ALONG, _ACROSS = 0.6180339887498949, 0.7548776662466927


def with_local_gains(fit: Fit, requirements: Requirements) -> Fit:
    """The fit with its plausible plants as the test step meets them; unchanged where the gain is the same all along."""
    return fit if fit.bend is None else replace(fit, plausible=at_local_gains(fit.plausible, fit, requirements))


def at_local_gains(plausible: Plausible, fit: Fit, requirements: Requirements) -> Plausible:
    """Plausible plants about the operating command as the test step meets them.

    For a loop that moves little about a command the slope of the curve there is the gain; of the commands that the test
    step goes through each takes its turn, evenly. An integrating plant comes back to its command: all that the records
    cover counts. Large moves are run through the curve itself.
    """
    if fit.bend is None:
        return plausible
    low, high = commands_of_step(fit, fit.bend, requirements)
    count = len(plausible.plants)
    place = np.arange(count)
    across = np.clip((place * _ACROSS) % 1.0, 0.5 / count, 1.0 - 0.5 / count)
    bends = fit.bend.bend + fit.bend.error * norm.ppf(across)
    slopes = slope_at(bends, np.asarray(low + (high - low) * ((place * _ALONG) % 1.0)))
    here = slope_at(bends, np.full(count, fit.operating_command - fit.bend.reference))
    return plausible.locally(slopes / here, bends / here)


def commands_of_step(fit: Fit, bend: Bend, requirements: Requirements) -> tuple[float, float]:
    """Lowest and highest command of the test step, steady, from the bend's reference, command unit."""
    here = fit.operating_command - bend.reference
    if fit.plant.integrators:
        return -bend.reach, bend.reach
    step, start = requirements.test_step or 0.0, requirements.step_start
    begin = 0.0 if start is None else start - fit.operating_response
    ends = [begin, begin + step, *([begin - step] if requirements.both_directions else [])]
    places = [here + _command_for(end / fit.plant.static_gain, bend.bend) for end in ends]
    return min(places), max(places)


def _command_for(driving: float, bend: float) -> float:
    """Command, from the reference, that drives the plant by so much; the curve's top where it never does."""
    if bend == 0.0:
        return driving
    inside = 1.0 + 4.0 * bend * driving
    return float((np.sqrt(max(inside, 0.0)) - 1.0) / (2.0 * bend))
