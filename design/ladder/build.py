"""From released gains to the ladder that leads to them."""

from dataclasses import replace

import numpy as np

from ...ident.fitted import Noise, Plausible
from ...ident.plant import Plant
from ..continuous import standing_in
from ..discretise import law_from_gains
from ..gains import Gains
from ..requirements import ControllerSetting, Limits, Requirements
from ..situation import Situation, situation_of
from .between import between
from .climb import Field, Step, climb, field_of
from .expected import expected_of, start_horizon
from .first_move import first_move
from .margins import less_gain_is_safer, on_plants
from .rung import Expected, Ladder, Rung

_PLANTS = 1000
_SHOWN = 80  # plants that make the bands
FIRST_STEP = 0.25  # of the test step, on the first rung

UNSTABLE = (
    "NO GAIN LADDER: THE PLANT RUNS AWAY WITH THE LOOP OPEN, SO LESS GAIN IS NOT SAFER; a first run needs a catch of "
    "its own (a mechanical stop, an operator's hand, a calmer loop inside), planned by the responsible person"
)
CONDITIONAL = (
    "NO GAIN LADDER: THE LOOP IS CONDITIONALLY STABLE, LESS GAIN IS NOT SAFER; ask for gains that are stable from zero "
    "gain on, or plan the first run with the responsible person"
)
NOT_FOUND = (
    "NO GAIN LADDER WAS FOUND: NO CONTROLLER WITH {share:.0f} % OF THE GAIN KEEPS DAMPING AND MARGIN FLOORS ON EVERY "
    "PLAUSIBLE PLANT, though less gain stays stable; plan the first run with the responsible person"
)


def build_ladder(
    gains: Gains,
    nominal: Plant,
    plausible: Plausible,
    *,
    operating_command: float,
    operating_response: float,
    noise: Noise | None,
    requirements: Requirements,
    limits: Limits,
    setting: ControllerSetting,
    old: Gains | None = None,
) -> Ladder:
    """Rung 0 with the loop open, then controllers of rising gain up to these gains.

    Parameters
    ----------
    gains : Gains
        The target, stable on every plausible plant.
    nominal, plausible
        As the gains were designed for; 1,000 of the plausible plants check every rung.
    old : Gains, optional
        Gains that the controller runs with now: where they hold on the new plant, the ladder starts from them.

    Returns
    -------
    Ladder
        Without rungs and with a refusal where less gain is not safer.

    Notes
    -----
    The lowest margin is the least of all that were checked: of n plants drawn from what is plausible, at most 2.5 %
    of it lies below with the confidence 1 - 0.975^n (order statistics, exact law), which is more than 99.9 % for 1,000.
    """
    situation = situation_of(
        operating_command=operating_command,
        operating_response=operating_response,
        noise=noise,
        requirements=requirements,
        limits=limits,
        setting=setting,
    )
    situation = standing_in(situation, nominal)
    noise_std = 0.0 if noise is None else noise.std
    checked = _with_fitted(nominal, plausible, _PLANTS, situation)
    shown = _with_fitted(nominal, plausible, _SHOWN, situation)
    opening = first_move(shown, situation, noise_std)
    everyone = field_of(checked, situation)
    refusal = _refusal(everyone, gains)
    if refusal:
        return Ladder(None if everyone.unstable else opening, (), refusal, True, noise_std=noise_std)
    steps, origin = None, "nothing"
    if old is not None:
        steps, origin = between(old, gains, everyone), "old gains"
    if not steps:
        found = climb(gains, checked, everyone, situation)
        if isinstance(found, float):
            said = NOT_FOUND.format(share=100.0 * found)
            return Ladder(opening, (), said, cautions=(said,), noise_std=noise_std)
        steps, origin = found, "nothing"
    rungs = _rungs(steps, shown, situation, noise_std)
    cautions = _cautions(everyone, gains, opening is None or opening.visible)
    return Ladder(opening, rungs, cautions=cautions, noise_std=noise_std, started_from=origin)


def _with_fitted(nominal: Plant, plausible: Plausible, count: int, situation: Situation) -> Plausible:
    """The fitted plant, which takes the median friction, in front of plants spread evenly over the draws."""
    every = np.linspace(0, len(plausible.plants) - 1, min(count, len(plausible.plants))).astype(int)
    some = plausible.take(np.unique(every).tolist())
    return some.led_by(nominal, situation.operating_command)


def _refusal(everyone: Field, gains: Gains) -> str:
    if everyone.unstable:
        return UNSTABLE
    return "" if less_gain_is_safer(everyone.spectra, gains) else CONDITIONAL


def _rungs(steps: list[Step], shown: Plausible, situation: Situation, noise_std: float) -> tuple[Rung, ...]:
    """From the target down, because a lower rung is the slower one."""
    rungs: list[Rung] = []
    horizon = start_horizon(situation, shown)
    for place in range(len(steps) - 1, -1, -1):
        step, expected = steps[place], None
        if situation.step:
            part = FIRST_STEP ** ((len(steps) - 1 - place) / max(len(steps) - 1, 1))
            expected, horizon = _inside_limits(step, shown, situation, noise_std, part, horizon)
        rungs.append(_rung(place + 1, step, situation, expected))
    return tuple(reversed(rungs))


def _inside_limits(
    step: Step, shown: Plausible, situation: Situation, noise_std: float, part: float, horizon: float
) -> tuple[Expected, float]:
    """The step halved until no plant of the band passes a limit of the response."""
    limits = situation.limits
    for _ in range(4):
        expected, horizon = expected_of(step.gains, shown, situation, noise_std, part, horizon)
        reach = (float(expected.band.low.min()), float(expected.band.high.max()))
        low = -np.inf if limits.response_lowest is None else limits.response_lowest
        high = np.inf if limits.response_highest is None else limits.response_highest
        if part >= 1.0 or (low <= reach[0] and reach[1] <= high):
            break
        part *= 0.5
    return expected, horizon


def _rung(number: int, step: Step, situation: Situation, expected: Expected | None) -> Rung:
    margins = step.margins
    return Rung(
        number,
        step.gains,
        law_from_gains(step.gains, situation.setting.update_interval, situation.clamp),
        step.share,
        float(margins.gain.min()),
        float(margins.phase.min()),
        float(margins.sensitivity.max()),
        step.damping,
        int(margins.stable.size) - 1,
        expected,
    )


def _cautions(everyone: Field, gains: Gains, visible: bool) -> tuple[str, ...]:
    said = []
    if not visible:
        said.append("rung 0: the first move is lost in the noise; move the command further by hand, inside its limits")
    if gains.integral and gains.structure != "I" and not _falls_together(everyone, gains):
        said.append(
            "TURNING DOWN THE PROPORTIONAL GAIN ALONE MAKES THIS LOOP UNSTABLE: use each rung's own integral and "
            "derivative, all of them together"
        )
    return tuple(said)


def _falls_together(everyone: Field, gains: Gains) -> bool:
    """Whether the proportional gain alone may fall to a tenth with the integral left as it is."""
    alone = replace(gains, proportional=0.1 * gains.proportional)
    return bool(on_plants(everyone.spectra, alone).stable.all())
