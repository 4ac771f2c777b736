"""The moving gain sheet: what the page needs to run the shipped law at other loop gains, and its script."""

import base64
import hashlib
import json
import math
from collections.abc import Iterable
from importlib.resources import files
from typing import Any

import numpy as np

from ...design.compensator import open_loop
from ...design.designed import Design, GainInterval
from ...design.discretise import columns_of, law_columns
from ...design.locus.condition import working
from ...design.requirements import Requirement
from ...design.sampled.bank import Bank
from ...design.situation import DISTURBED, Situation, situation_of
from ...design.sweep import Band, GainSweep
from ...design.sweep_gains import sweep_gains
from ...ident.fitted import Fit
from ...ident.run import FloatArray
from ..figures.gain_ribbon import ribbon_span
from ..figures.gallery import headrooms
from ..figures.locus import view_of
from ..figures.locus_lines import locus_lines
from ..figures.step import told
from ..outcome import Outcome
from . import words

_SCRIPTS = ("moving_law.js", "moving_draw.js", "moving_ribbon.js", "moving_follow.js", "moving.js")
_LINE = 60  # points of a drawn line of the locus


def moving_part(outcome: Outcome) -> dict[str, Any] | None:
    """What the page's template needs; None without a fitted plant and a design."""
    from markupsafe import Markup

    if outcome.fit is None or outcome.design is None:
        return None
    sweep = sweep_of(outcome, outcome.fit, outcome.design)
    data, text = moving_data(outcome, outcome.fit, outcome.design, sweep), script()
    return {
        "data": Markup(data_block(data)),
        "script": Markup(text),
        "source": Markup(script_source(text)),
        "stepped": bool(sweep.time.size),
        "limited": bool(data["limits"]),
        **_guides(sweep),
    }


def _guides(sweep: GainSweep) -> dict[str, str]:
    sticks = sweep.fitted.running.valves is not None
    stuck = " The actuator that sticks is run too: what hunts here hunts on the rig." if sticks else ""
    longer = "" if _as_shipped(sweep) else (
        f" The band is run with an update interval of {words.every(sweep.band_interval)} and the same total delay, to "
        "keep the sheet small."
    )  # fmt: skip
    law = "the very law with its clamp, run in this page"
    if sweep.fitted.situation.setting.continuous:
        law = (
            "the continuous controller with its clamp, run in this page by a law that is updated every "
            f"{words.every(sweep.fitted.running.interval)} and whose delay is taken off the dead time"
        )
    more = (
        " The ribbon ends where that stand-in is no longer believed: far below the gain at which it becomes unstable."
        if sweep.capped else ""
    )  # fmt: skip
    return {
        "ribbon_guide": (
            "How to use it: drag the handle, or click on the ribbon; with the keyboard the arrows move by one gain, "
            "page up and down by ten, home and end to the ends. The zeros stay, only K moves; the dotted line is the "
            "chosen K. Rows are filled where a requirement holds. On each row the bead shows the slack of the fitted "
            "plant: the bound is the upright line, room is to its right; the bar behind it holds 95 % of "
            f"{sweep.plants} plausible plants (at the chosen K: of all that the gains were checked on), and the figure "
            f"is the worse of its end and the bead. A hollow bead misses its bound.{stuck}{more}"
        ),
        "locus_guide": (
            "How to read it: filled diamonds are the closed-loop poles of the fitted plant at this K, dotted ones "
            "those at the chosen K; crosses and rings are where they start and end. Left is faster, further from the "
            "real axis swings more, right of the upright axis is unstable."
        ),
        "step_guide": (
            f"How to read it: the full line is the fitted plant under {law}; "
            "the band holds 95 % of the plausible plants where all are stable; the dotted line is what the chosen K "
            f"does.{longer}"
        ),
        "headroom_guide": (
            "How to read it: filled as far as the worst of those plausible plants goes, the ring is the fitted plant."
        ),
    }


def _as_shipped(sweep: GainSweep) -> bool:
    return math.isclose(sweep.band_interval, sweep.fitted.exact.interval)


def sweep_of(outcome: Outcome, fit: Fit, design: Design) -> GainSweep:
    """The sweep behind the moving sheet of a finished job."""
    shown = 0.0 if design.trajectory is None else float(told(design.trajectory, design.judged).time[-1])
    return sweep_gains(
        design.gains,
        design.selection,
        fit.plant,
        fit.plausible,
        _situation(outcome, fit),
        span=ribbon_span(design.selection),
        shown=shown,
    )


def _situation(outcome: Outcome, fit: Fit) -> Situation:
    rig = outcome.rig
    return situation_of(
        operating_command=fit.operating_command,
        operating_response=fit.operating_response,
        noise=fit.noise,
        requirements=rig.requirements,
        limits=rig.limits,
        setting=rig.setting,
    )


def moving_data(outcome: Outcome, fit: Fit, design: Design, sweep: GainSweep) -> dict[str, Any]:
    """Everything that the page draws or runs, as values of JSON; "never" is inf, null is unknown."""
    situation = sweep.fitted.situation
    unit = design.selection.loop_gain_unit
    return {
        "units": {"gain": unit, "command": outcome.rig.command_unit, "response": outcome.rig.response_unit},
        "gains": _exact(sweep.gains),
        "chosen": sweep.chosen,
        "stable": sweep.stable.tolist(),
        "confidence": situation.requirements.confidence,
        "share": {"stable": _exact(sweep.share_stable), "meeting": _exact(sweep.share_meeting)},
        "plants": sweep.plants,
        "checked": _checked(design, situation.requirements.confidence),
        "rows": [_row(item, design, sweep) for item in situation.requirements.items],
        "together": _pairs(design.selection.intervals),
        "plausible": _pairs(design.selection.intervals_plausible),
        "limits": _limits(outcome, design, sweep),
        "locus": _locus(outcome, fit, design, sweep),
        "plant": _plant(sweep),
        "law": _law(design, sweep),
        "run": _run(sweep),
        "band": _band(sweep),
    }


def _checked(design: Design, confidence: float) -> str:
    if not design.plants_checked:
        return ""
    meeting, asked = words.share(design.share_meeting), words.share(confidence)
    return f"Of the {design.plants_checked} plausible plants checked {meeting} meet all together ({asked} asked for)."


def _exact(values: FloatArray) -> list[Any]:
    return [_number(float(value)) for value in values]


def _number(value: float, digits: int = 17) -> float | str | None:
    if math.isnan(value):
        return None
    if math.isinf(value):
        return "never"
    return float(f"{value:.{digits}g}")


def _short(values: FloatArray) -> list[Any]:
    return [_number(float(value), 9) for value in values]


def _pairs(intervals: Iterable[GainInterval]) -> list[list[float | None]]:
    return [[low, high] for low, high in intervals]


def _row(item: Requirement, design: Design, sweep: GainSweep) -> dict[str, Any]:
    nothing = np.full(sweep.gains.size, np.nan)
    band = _with_checked(sweep.bands.get(item.name, Band(nothing, nothing)), item, design, sweep.chosen)
    rows = dict(design.selection.rows)
    return {
        "name": item.name,
        "said": words.in_words(item),
        "bound": words.bound(item),
        "sense": item.sense,
        "limit": item.limit,
        "unit": item.unit,
        "scale": item.scale,
        "band": item.band,
        "push": item.command_step,
        "intervals": _pairs(rows.get(item.name, ())),
        "values": _exact(sweep.values.get(item.name, nothing)),
        "low": _short(band.low),
        "high": _short(band.high),
    }


def _with_checked(band: Band, item: Requirement, design: Design, chosen: int) -> Band:
    """At the chosen K the band of the many plants that the printed gains were checked on, as the table has it."""
    judged = next((each for each in design.judged if each.requirement == item and not each.floor), None)
    if judged is None or not design.all_stable:
        return band
    low, high = band.low.copy(), band.high.copy()
    low[chosen], high[chosen] = (math.inf if end is None else end for end in (judged.low, judged.high))
    return Band(low, high)


def _limits(outcome: Outcome, design: Design, sweep: GainSweep) -> list[dict[str, Any]]:
    rows = []
    for row in headrooms(outcome):
        worst = sweep.worst.get(row.name)
        if row.limit is None or math.isinf(row.limit):
            continue
        rows.append({
            "name": row.name, "role": row.role, "unit": row.unit, "start": row.start, "limit": row.limit,
            "worst": None if worst is None else _short(_with_worst(worst, row.worst, sweep.chosen)),
        })  # fmt: skip
    return rows


def _with_worst(worst: FloatArray, checked: float | None, chosen: int) -> FloatArray:
    """The same for a limit."""
    if checked is None or not math.isfinite(checked):
        return worst
    found = worst.copy()
    found[chosen] = checked
    return found


def _locus(outcome: Outcome, fit: Fit, design: Design, sweep: GainSweep) -> dict[str, Any]:
    loop = open_loop(design.gains, fit.plant, outcome.rig.setting)
    found = working(loop, design.selection.pole)
    view = view_of(found)
    lines = [line[np.unique(np.linspace(0, len(line) - 1, _LINE).astype(int))] for line in locus_lines(loop, view)]
    return {
        "view": list(view),
        "lines": [{"re": _short(line.real), "im": _short(line.imag)} for line in lines if len(line) > 1],
        "poles": [[vector.root.real, vector.root.imag] for vector in found.poles],
        "zeros": [[vector.root.real, vector.root.imag] for vector in found.zeros],
        "branches": [{"re": _exact(branch.real), "im": _exact(branch.imag)} for branch in sweep.poles],
    }


def _plant(sweep: GainSweep) -> dict[str, Any]:
    """The sampled model of the fitted plant, as `design.sampled.bank` states it, or the drive with its friction."""
    bank = sweep.fitted.running
    drive = bank.drives
    rough = None
    if drive is not None and drive.friction[0] > 0.0:
        rough = {name: float(getattr(drive, name)[0]) for name in ("gain", "lag", "friction", "delay")}
    return {
        "interval": bank.interval,
        "points": bank.points,
        "states": bank.states,
        "step": bank.step[:, :, 0].tolist(),
        "slope": bank.rate[:, :, 0].tolist(),
        "lag": int(bank.lag[0]),
        "seen": bank.seen[:, 0].tolist() if bank.ahead else None,
        "filtered": bank.filtered,
        "filter_time": bank.filter_time,
        "integrators": int(bank.integrators[0]),
        "static_gain": float(bank.static_gain[0]),
        "drive": rough,
        "valve": _valve(bank),
    }


def _valve(bank: Bank) -> dict[str, float] | None:
    """Of the fitted plant; a drive with friction is run without."""
    if bank.valves is None or bank.valves[0, 0] <= 0.0:
        return None
    return dict(zip(("band", "short", "above"), bank.valves[:, 0].tolist(), strict=True))


def _law(design: Design, sweep: GainSweep) -> dict[str, Any]:
    """The law at the chosen K; setpoint and response coefficients grow with K, the others stay."""
    law = law_columns(columns_of([design.gains]), sweep.fitted.running.interval)
    return {name: getattr(law, name)[:, 0].tolist() for name in ("command", "setpoint", "response", "memory")}


def _run(sweep: GainSweep) -> dict[str, Any]:
    situation = sweep.fitted.situation
    clamp = situation.clamp
    return {
        "samples": sweep.fitted.samples,
        "shown": float(sweep.time[-1]) if sweep.time.size else 0.0,
        "start": situation.start,
        "step": situation.step,
        "both": situation.requirements.both_directions,
        "pushes": sorted({item.command_step or 0.0 for item in situation.items if item.name in DISTURBED}),
        "command": situation.operating_command,
        "response": situation.operating_response,
        "clamp": {"lowest": clamp.lowest, "highest": clamp.highest, "rate": clamp.rate},
    }


def _band(sweep: GainSweep) -> dict[str, Any]:
    """Bands of the test step as 32-bit numbers, gain by gain."""
    return {
        "time": _short(sweep.time),
        **{
            f"{name}_{side}": _packed(getattr(getattr(sweep, name), side))
            for name in ("response", "command")
            for side in ("low", "high")
        },
    }


def _packed(values: FloatArray) -> str:
    return base64.b64encode(np.ascontiguousarray(values.T, dtype="<f4").tobytes()).decode("ascii")


def data_block(data: dict[str, Any]) -> str:
    r"""JSON that can stand inside a script element, whatever the names in it are.

    Examples
    --------
    >>> data_block({"name": "</script>"})
    '{"name":"\\u003c/script>"}'
    """
    text = json.dumps(data, separators=(",", ":"), allow_nan=False)
    return text.replace("<", r"\u003c").replace("\u2028", r"\u2028").replace("\u2029", r"\u2029")


def script() -> str:
    """The page's own script, its files one after another in a room of their own."""
    parts = [files(__package__).joinpath(name).read_text(encoding="utf-8") for name in _SCRIPTS]
    return '(() => {\n"use strict";\n' + "\n".join(parts) + "})();\n"


def script_source(text: str) -> str:
    """What the page's policy lets run: this text and nothing else."""
    return f"'sha256-{base64.b64encode(hashlib.sha256(text.encode()).digest()).decode('ascii')}'"
