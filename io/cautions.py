"""Cautions: the usual ones for a first run on hardware, and those that a job's own numbers give rise to."""

import math
from collections.abc import Iterator
from dataclasses import fields

import numpy as np

from ..design.designed import Design, LimitJudged, Selection
from ..design.requirements import Limits
from ..ident.bend import slope_at
from ..ident.fitted import Fit
from .figures.words import number, with_unit
from .rigfile.rig import Rig

FIRST_RUN: tuple[str, ...] = (
    "These gains come from a calculation on logs. A person who is responsible for the rig, and licensed where the "
    "law asks for it, decides whether and how they are tried. Local codes and site rules come before anything printed "
    "here.",
    "Judge the risk before the first run: reach, crushing, heat, pressure, flying parts. ISO 12100 (Safety of "
    "machinery - General principles for design - Risk assessment and risk reduction) gives the order: safe design "
    "first, then guarding, then information. No compliance with it is claimed here.",
    "Guard first: nobody within reach of anything that moves, heats or is under pressure while gains are tried.",
    "Have an emergency stop at hand and try it before the run. ISO 13850 (Emergency stop function - Principles for "
    "design) and IEC 60204-1 (Electrical equipment of machines - General requirements, with its stop categories) are "
    "where to read. Know what a stop does here: power taken at once can let an axis coast or a load fall.",
    "Isolate the energy before hands go in: lock out and tag out by the rules that hold at your place.",
    "Let stored energy out, or hold it: springs, pressure, raised masses, charged capacitors and hot parts stay "
    "dangerous after the power is off.",
    "A vertical or otherwise loaded axis can drop when the controller stops, when gains are changed, or when the "
    "sensor is lost: block it or brake it mechanically.",
    "A lost, frozen or reversed sensor makes any controller drive to its limit. Check sign and scale by hand at low "
    "power first, and let loss of the signal stop the rig.",
    "End stops, over-travel switches, over-temperature and over-pressure cut-outs must act independently of this loop "
    "and of its computer. A control loop is no safety function: ISO 13849-1 (Safety-related parts of control systems - "
    "General principles for design) is about those that are, and doesn't cover this one.",
)
SMALL_HEADROOM = 0.10
FAR_POLE = 0.05
NEAR_BOUND = 0.15
LOUD_NOISE = 0.10


def cautions_for(rig: Rig, design: Design | None, fit: Fit | None = None) -> tuple[str, ...]:
    """Every caution for this job: what its numbers say first, then the usual ones.

    Parameters
    ----------
    rig : Rig
    design : Design or None
    fit : Fit or None
        Without it nothing is said of stiction, and the operating point is taken from the clamp.
    """
    return (*derived_cautions(rig, design, fit), *FIRST_RUN)


def derived_cautions(rig: Rig, design: Design | None, fit: Fit | None = None) -> tuple[str, ...]:
    """The cautions that a job's own numbers give rise to, each with the number."""
    found = list(missing_limits(rig.limits))
    if design is not None:
        command, response = operating_point(rig, design, fit)
        found += headroom_cautions(design, command, response)
        found += clamp_caution(design)
        found += one_sided_caution(rig, design, command)
        found += noise_caution(rig, design, fit)
        found += sampling_caution(design.selection)
        found += stiction_caution(rig, design, fit)
    if fit is not None:
        found += sticking_caution(rig, fit)
        found += curve_caution(rig, fit)
    return tuple(found)


def operating_point(rig: Rig, design: Design, fit: Fit | None) -> tuple[float | None, float | None]:
    """Command and response from which the deviations start; None where nothing tells."""
    if fit is not None:
        return fit.operating_command, fit.operating_response
    clamp, limits = design.law.clamp, rig.limits
    command = rig.operating_command
    for absolute, deviation in ((limits.command_lowest, clamp.lowest), (limits.command_highest, clamp.highest)):
        if command is None and absolute is not None and deviation is not None and math.isfinite(absolute):
            command = absolute - deviation
    return command, rig.operating_response


def missing_limits(limits: Limits) -> Iterator[str]:
    """One caution for each limit that was not given; "not limited" is a given one."""
    for field in fields(limits):
        if getattr(limits, field.name) is None:
            quantity, side = field.name.split("_")
            key = "highest" if side == "rate" else side
            table = f"{quantity}_rate" if side == "rate" else quantity
            yield (
                f"MISSING LIMIT: {quantity} {side} was not given, so nothing was checked against it; state "
                f'[limits] {table} = {{ {key} = "..." }}, or "not limited" where nothing can be harmed.'
            )


def headroom_share(judged: LimitJudged, start: float | None) -> float | None:
    """Share of the way from the operating reading to the limit that is left; None where there is no finite way.

    Parameters
    ----------
    judged : LimitJudged
    start : float or None
        Operating reading; None or a rate: the way starts at 0.

    Examples
    --------
    >>> headroom_share(LimitJudged("command highest", 10.0, 9.5, "V", 0.5, True), 5.0)
    0.1
    """
    origin = 0.0 if start is None or judged.name.endswith("rate") else start
    way = abs(judged.limit - origin)
    if not math.isfinite(way) or way == 0.0:
        return None
    return judged.headroom / way


def headroom_cautions(design: Design, command: float | None, response: float | None) -> Iterator[str]:
    """A limit with less than a tenth of the way to it left, on the worst plausible plant, or passed."""
    for each in design.limits:
        left = headroom_share(each, command if each.name.startswith("command") else response)
        if left is None or left >= SMALL_HEADROOM:
            continue
        worst, limit = with_unit(each.predicted_worst, each.unit), with_unit(each.limit, each.unit)
        if left < 0.0:
            yield f"Limit passed: {each.name} reaches {worst} on the worst plausible plant, and {limit} is the limit."
        else:
            yield (
                f"Little headroom: {each.name} reaches {worst} of {limit} on the worst plausible plant, "
                f"{number(100 * left, 2)} % of the way is left."
            )


def clamp_caution(design: Design) -> Iterator[str]:
    """The command is limited during the test step."""
    if design.clamped_share > 0.0:
        yield (
            f"The command is limited during the test step on {number(100 * design.clamped_share, 3)} % of the "
            f"plausible plants, for {with_unit(design.clamped_duration, 's', 3)} at the longest. A larger step is "
            "slower and may overshoot more than what was checked."
        )


def one_sided_caution(rig: Rig, design: Design, command: float | None) -> Iterator[str]:
    """A bound so near to the operating command that the loop can't push back that way."""
    low, high = rig.limits.command_lowest, rig.limits.command_highest
    if command is None or low is None or high is None or not math.isfinite(high - low) or high <= low:
        return
    for bound, way in ((low, "down"), (high, "up")):
        room = abs(command - bound)
        one_sided = bound == 0.0
        if room <= NEAR_BOUND * (high - low) or (one_sided and _reaches(design, bound, high - low)):
            yield (
                f"The loop can't push back: the operating command of {with_unit(command, rig.command_unit)} leaves "
                f"{with_unit(room, rig.command_unit, 3)} {way} to the bound of {with_unit(bound, rig.command_unit)}. "
                "Beyond that the response returns only as fast as the rig lets it by itself."
            )


def _reaches(design: Design, bound: float, span: float) -> bool:
    trajectory = design.trajectory
    if trajectory is None:
        return False
    nearest = min(abs(float(trajectory.command_low.min()) - bound), abs(float(trajectory.command_high.max()) - bound))
    return nearest < 0.01 * span


def noise_caution(rig: Rig, design: Design, fit: Fit | None) -> Iterator[str]:
    """Measurement noise that reaches the command as a visible share of its range."""
    low, high = rig.limits.command_lowest, rig.limits.command_highest
    rms = command_noise(design, fit)
    if rms is None or low is None or high is None or not 0.0 < high - low < math.inf:
        return
    span = 6.0 * rms / (high - low)
    if span > LOUD_NOISE:
        yield (
            f"Measurement noise moves the command by {with_unit(rms, rig.command_unit, 3)} rms, peaks of about "
            f"{number(100 * span, 2)} % of its range (six times the rms): wear, heat and noise at the actuator. A "
            "longer derivative filter time or a quieter sensor helps."
        )


def command_noise(design: Design, fit: Fit | None) -> float | None:
    """rms of the command from measurement noise, command unit: as judged, else of the direct path alone."""
    for each in design.judged:
        if each.requirement.name == "command_noise" and each.predicted is not None:
            return each.predicted
    if fit is None or not design.law.response:
        return None
    return abs(design.law.response[0]) * fit.noise.std


def sampling_caution(selection: Selection) -> Iterator[str]:
    """The exact sampled pole stands apart from the point of the locus: sampling is slow for this loop."""
    size = abs(selection.pole)
    if size == 0.0:
        return
    apart = abs(selection.sampled_pole - selection.pole) / size
    if apart > FAR_POLE:
        yield (
            f"Sampling is slow for this loop: the exact pole of the sampled loop stands {number(100 * apart, 2)} % "
            "away from the chosen point of the locus. Every requirement was judged on the sampled law; a shorter "
            "update interval would bring the two together."
        )


def curve_caution(rig: Rig, fit: Fit) -> Iterator[str]:
    """The gain of the plant differs along the command."""
    bend = fit.bend
    if bend is None:
        return
    ends = np.array([bend.reference - bend.reach, bend.reference + bend.reach])
    low, high = 100.0 * (slope_at(np.full(2, bend.bend), ends - bend.reference) - 1.0)
    yield (
        f"The gain differs along the command (the bend is known to {number(100.0 * bend.error / abs(bend.bend), 2)} %, "
        f"one standard error): against that at {with_unit(bend.reference, rig.command_unit)} it is {low:+.1f} % at "
        f"{with_unit(ends[0], rig.command_unit)} and {high:+.1f} % at {with_unit(ends[1], rig.command_unit)}. The "
        "plausible plants have every gain on the way of the test step, and large moves run through the curve; about "
        "another operating point the same gains are another loop."
    )


def sticking_caution(rig: Rig, fit: Fit) -> Iterator[str]:
    """The records show an actuator that sticks: how far short it rests, and what is open about its band."""
    if fit.sticking is None or fit.plausible.valves is None:
        return
    there = fit.plausible.valves[:, 0] > 0.0
    if not there.any():
        return
    unit, ordered = rig.command_unit, np.sort(fit.plausible.valves[there, :2], axis=0)
    place = ordered.shape[0] - 1
    sure = fit.sticking.sure
    begins = (
        "The actuator sticks"
        if sure
        else "The actuator may stick, or the level drifts: the records can't tell. If it does"
    )
    share = "" if sure else f" on {100.0 * np.mean(there):.0f} % of the plausible plants"
    low, middle, high = (ordered[round(share * place)] for share in (0.025, 0.5, 0.975))
    told = " and that is all that its moves show of the band" if np.ptp(fit.sticking.weights) < 0.01 else ""
    yield (
        f"{begins}: it comes to rest about {with_unit(middle[1], unit, 2)} short of the command (95 %: "
        f"{number(low[1], 2)} to {with_unit(high[1], unit, 2)}){told}. A move within {with_unit(middle[0], unit, 2)} "
        f"of where it stands (95 %: {number(low[0], 2)} to {with_unit(high[0], unit, 2)}) moves nothing. The release "
        f"check simulates it{share}."
    )


def stiction_caution(rig: Rig, design: Design, fit: Fit | None) -> Iterator[str]:
    """Integral action on a rig that sticks: it hunts about the setpoint."""
    if fit is None or design.gains.integral == 0.0 or fit.plausible.stiction.size == 0:
        return
    ordered = sorted(float(each) for each in fit.plausible.stiction)
    middle, highest = ordered[len(ordered) // 2], ordered[-1]
    if middle > 0.0:
        yield (
            f"The rig sticks: about {with_unit(middle, rig.command_unit, 2)} of command (up to "
            f"{with_unit(highest, rig.command_unit, 2)}) is swallowed before the response moves. With integral action "
            "it may hunt slowly about the setpoint; watch for it at rest."
        )
