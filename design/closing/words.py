"""What the comparison found, in words with sizes and units."""

from dataclasses import dataclass

import numpy as np

from ...ident.causes import Cause, Explained
from ...ident.confront import Change
from ...ident.fitted import Fit

# A cause that takes away less of the miss than this explains nothing; a second one as good as this share of the first
# is told beside it, because the run can't tell them apart.
_EXPLAINS, _AS_GOOD = 0.6, 0.97
# A level that moved by less than this share of the response's movement, or within the noise, is not told.
_LEVEL = 0.1
_SAMPLES = 6.0  # up to so many samples of the log a delay is told in samples too


@dataclass(frozen=True)
class Units:
    """Of command and response, as the rig file has them; empty where nobody said."""

    command: str = ""
    response: str = ""


NO_UNITS = Units()


def cause_text(explained: Explained, fit: Fit, units: Units, interval: float) -> str:
    """The best cause with its size, and one that the run can't tell from it; empty where none explains the miss.

    Parameters
    ----------
    interval : float, s
        Of the log.
    """
    good = [cause for cause in explained.causes if cause.explains >= _EXPLAINS]
    if not good:
        return ""
    best = good[0]
    told = [_cause(cause, fit, units, interval) for cause in good if cause.explains >= _AS_GOOD * best.explains]
    return f"{' or '.join(told[:2])} would explain {100 * best.explains:.0f} % of the miss"


def level_text(explained: Explained, fit: Fit, units: Units, movement: float) -> str:
    """How far the level moved; empty where it did not."""
    if abs(explained.level) <= max(_LEVEL * movement, 3.0 * fit.noise.std):
        return ""
    command = with_unit(explained.level_command, units.command, "+.3g")
    moved = with_unit(explained.level, units.response, "+.3g")
    if fit.plant.integrators:
        return f"another load: the response drifts by {moved} over the run, as a command of {command} would make it"
    return (
        f"another operating point: the level lies {moved} from the fitted one, as a command of {command} would put it"
    )


def _cause(cause: Cause, fit: Fit, units: Units, interval: float) -> str:
    size, error = cause.size, cause.error
    if cause.name == "gain" and size < -1.0:
        return "a gain of the other sign"
    if cause.name in ("gain", "natural frequency", "damping ratio", "time constants", "friction"):
        name = {"time constants": "time constants changed", "friction": "friction changed"}.get(cause.name, "")
        name = name or f"a {cause.name} changed"
        return f"{name} by {100 * size:+.3g} % (+- {100 * error:.2g} %)"
    if cause.name == "delay":
        samples = size / interval
        near = abs(samples) <= _SAMPLES and abs(samples - round(samples)) < 0.35 and round(samples) != 0
        counted = f", {abs(round(samples))} sample{'s' if abs(round(samples)) > 1 else ''} of this log" if near else ""
        return f"a delay of {size:+.3g} s (+- {error:.2g} s{counted})"
    if cause.name == "play":
        return f"play or sticking of {with_unit(size, units.command)} in the actuator"
    if cause.name == "command ends":
        return f"a command that ends at {with_unit(size, units.command)} (saturation)"
    return f"a drift of {with_unit(size, units.response, '+.3g')} over the run"


def with_unit(value: float, unit: str, form: str = ".3g") -> str:
    """A number with its unit, where there is one."""
    return f"{value:{form}} {unit}" if unit and unit != "1" else f"{value:{form}}"


def change_text(change: Change, fit: Fit) -> str:
    """One parameter of the run's own fit against the fitted one."""
    if change.name == "dead time":
        return f"dead time {seconds(change, fit):+.3g} s"
    if change.ratio < 0:
        return f"{change.name} of the other sign"
    if change.ratio > 3.0 or change.ratio < 1.0 / 3.0:
        return f"{change.name} {change.ratio:.2g} times as large"
    return f"{change.name} {100 * (change.ratio - 1):+.1f} %"


def seconds(change: Change, fit: Fit) -> float:
    """Change of the dead time, which is stated relative to dead time and slowest time constant together."""
    moving = fit.plant.poles[fit.plant.poles != 0]
    slowest = float(np.max(1.0 / np.maximum(np.abs(moving), 1e-300), initial=0.0))
    return (change.ratio - 1) * (fit.plant.dead_time + slowest)
