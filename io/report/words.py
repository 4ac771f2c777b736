"""Names and phrases that report and terminal share."""

import math
from collections.abc import Sequence

from ...design.closing.compared import Compared
from ...design.designed import Design, Judged
from ...design.requirements import Requirement
from ...ident.law import Clamp
from ..figures.words import number, with_unit
from ..outcome import Outcome

RELEASED = (
    "The gains may be used as printed. They were checked by calculation; the person responsible for the rig still "
    "approves."
)
HELD = "Don't load these gains. What speaks against them:"
USE = "Use one form only, the one that your controller is built in; times in seconds."
STUDY = "They are the best that was found, and they are not released. Times in seconds."
FORMS = {
    "parallel": "P + I/s on the error, D s/(Tf s + 1) on minus the response",
    "standard": "G (1 + 1/(Ti s) + Td s/(Tf s + 1))",
    "series": "G (1 + 1/(Ti s)) (Td s + 1)/(Tf s + 1)",
    "zero-pole": "G (s + zero)/(s + pole) on the error; for lead-lag times (s + second zero)/(s + second pole)",
    "standard, minutes": "the standard form with its times in minutes",
    "standard, repeats": "the standard form with 1/Ti, repeats of the proportional move, in place of Ti",
    "per sample": "P, I T for a sum of errors and D/T for a difference of responses, T the update interval",
    "proportional band": "100 %/G in shares of both signals' ranges; the controller's action gives the sign",
    "zeros": "K (s + zero) (s + second zero) over s and Tf s + 1, as far as the structure has them",
}
GAIN_NAMES = {
    "proportional": "proportional P",
    "integral": "integral I",
    "derivative": "derivative D",
    "derivative_filter_time": "derivative filter time Tf",
    "gain": "gain G",
    "integral_time": "integral time Ti",
    "derivative_time": "derivative time Td",
    "zero": "zero",
    "pole": "pole",
    "second_zero": "second zero",
    "second_pole": "second pole",
    "repeats_per_second": "repeats, per second",
    "repeats_per_minute": "repeats, per minute",
    "integral_per_sample": "integral, per sample",
    "derivative_per_sample": "derivative, per sample",
    "filter_samples": "derivative filter time Tf",
    "sample": "update interval T",
    "loop_gain": "loop gain K",
}


def spaced(name: str) -> str:
    """A key of the rig file as words.

    Examples
    --------
    >>> spaced("settling_time")
    'settling time'
    """
    return name.replace("_", " ")


def in_words(requirement: Requirement) -> str:
    """The requirement's name with what it depends on."""
    name = spaced(requirement.name)
    if requirement.name == "settling_time" and requirement.band is not None:
        return f"{name} into ±{number(100 * requirement.band)} %"
    return name


def scaled(value: float | None, requirement: Requirement, digits: int = 3) -> str:
    """A value in base units as the person would write it."""
    return with_unit(_shown(value, requirement), requirement.unit, digits)


def _shown(value: float | None, requirement: Requirement) -> float | None:
    """In the unit of the requirement; less than a hundredth of a per cent is nothing."""
    if value is None:
        return None
    shown = value * requirement.scale
    return round(shown, 2) if requirement.unit == "%" and math.isfinite(shown) else shown


def bound(requirement: Requirement) -> str:
    """The bound itself: "at most 10 %"."""
    return f"{spaced(requirement.sense)} {scaled(requirement.limit, requirement, 4)}"


def interval(judged: Judged) -> str:
    """The 95 % interval over the plausible plants."""
    low, high = judged.low, judged.high
    if low is None and high is None:
        return "never"
    unit = judged.requirement.unit
    ends = [number(_shown(end, judged.requirement), 3) for end in (low, high)]
    return f"{ends[0]} to {ends[1]}" + ("" if unit in ("", "1") else f" {unit}")


def share(part: float) -> str:
    """A share in per cent that never rounds up to all.

    Examples
    --------
    >>> share(0.9996), share(1.0), share(0.95)
    ('99.9 %', '100 %', '95 %')
    """
    tenths = int(1000.0 * part + 1e-9)
    return f"{tenths // 10} %" if tenths % 10 == 0 else f"{tenths / 10:.1f} %"


def checked_on(design: Design, confidence: float) -> str:
    """How many plants were checked and how many of them meet everything."""
    stable = "every one is stable" if design.all_stable else "NOT EVERY ONE IS STABLE"
    limits = "every one keeps inside the limits" if design.limits_kept else "A LIMIT IS PASSED"
    return (
        f"{design.plants_checked} plausible plants were checked: {stable}, {limits}, and "
        f"{share(design.share_meeting)} meet all requirements together ({share(confidence)} asked for)."
    )


def clamped(design: Design) -> str:
    """How often and how long the command is limited during the test step."""
    if design.clamped_share <= 0.0:
        return "The command stays inside its limits during the test step on every checked plant."
    return (
        f"The command is limited during the test step on {share(design.clamped_share)} of the plausible plants, "
        f"for {with_unit(design.clamped_duration, 's', 3)} at the longest."
    )


def every(interval: float) -> str:
    """The update interval as people say it.

    Examples
    --------
    >>> every(0.02), every(10.0)
    ('20 ms', '10 s')
    """
    return with_unit(interval, "s", 6) if interval >= 1.0 else with_unit(interval * 1e3, "ms", 6)


def action(design: Design) -> str:
    """Direct or reverse, in words."""
    gains = design.gains
    sign = gains.integral or gains.proportional or gains.derivative
    return "reverse: the command falls when the response rises" if sign > 0 else (
        "direct: the command rises when the response rises"
    )  # fmt: skip


def clamp_in_words(clamp: Clamp, unit: str) -> str:
    """The clamp in deviations from the operating point."""
    ends = [
        f"lowest {with_unit(clamp.lowest, unit)}" if clamp.lowest is not None else "",
        f"highest {with_unit(clamp.highest, unit)}" if clamp.highest is not None else "",
        f"rate {with_unit(clamp.rate, f'{unit}/s')}" if clamp.rate is not None else "",
    ]
    return ", ".join(end for end in ends if end) or "none"


def agreement(compared: Compared) -> str:
    """Misfit, noise floor and coverage of a held-out record, where there are any."""
    numbers = (compared.misfit, compared.noise_floor, compared.coverage_95)
    if not all(math.isfinite(each) for each in numbers):
        return "No misfit can be given."
    if compared.table is not None:
        return (
            f"The points lie {share(compared.misfit)} from the fitted plant's response, rms, and their own errors are "
            f"{share(compared.noise_floor)}; {share(compared.coverage_95)} of them lie within the 95 % errors of both."
        )
    return (
        f"Misfit {number(compared.misfit, 3)} against a noise floor of {number(compared.noise_floor, 3)} (rms error "
        f"over the spread of the response); {share(compared.coverage_95)} of the samples lie in the 95 % band."
    )


def listed(items: Sequence[str]) -> str:
    """Names in a row: "a, b and c"."""
    return " and ".join([", ".join(items[:-1]), items[-1]]) if len(items) > 1 else "".join(items)


def headline(outcome: Outcome) -> str:
    """RELEASED or HELD."""
    return outcome.status.upper()
