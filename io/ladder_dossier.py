"""The ladder in the dossier: each rung's gains, margins and prediction."""

import h5py

from ..design.ladder.rung import Band, Expected, FirstMove, Ladder, Rung, Spread
from .dossier_parts import numbers
from .rigfile.rig import Rig


def put_ladder(group: h5py.Group, ladder: Ladder, rig: Rig) -> None:
    """Rungs as groups 0, 1, ...; a refused ladder has the attribute `refusal` and no rungs."""
    group.attrs["refusal"] = ladder.refusal
    group.attrs["started_from"] = ladder.started_from
    if ladder.first_move is not None:
        _put_first_move(group.create_group("0"), ladder.first_move, rig)
    for rung in ladder.rungs:
        _put_rung(group.create_group(str(rung.number)), rung, rig)


def _put_first_move(group: h5py.Group, move: FirstMove, rig: Rig) -> None:
    numbers(group, "command", [move.command_from, move.command_to], rig.command_unit, "from, to; the loop is open")
    _put_spread(group, "response_moves", move.moves, rig.response_unit, "how far the response has moved by then")
    numbers(group, "at_least", [move.at_least], rig.response_unit, "less, or the other way: stop")
    numbers(group, "within", [move.within], "s", "time given to the move")
    _put_band(group.create_group("band"), move.band, rig)


def _put_rung(group: h5py.Group, rung: Rung, rig: Rig) -> None:
    gains, law = rung.gains, rung.law
    group.attrs["structure"] = gains.structure
    group.attrs["plants_checked"] = rung.plants_checked
    parallel = [gains.proportional, gains.integral, gains.derivative, gains.filter_time, gains.zero, gains.pole]
    units = f"{rig.command_unit} per {rig.response_unit}: 1, 1/s, s; then s, 1/s, 1/s"
    text = "proportional, integral, derivative, filter time; zero and pole of lead and lag"
    numbers(group, "gains", parallel, units, text)
    for name in ("command", "setpoint", "response", "memory"):
        numbers(group, f"law/{name}", getattr(law, name), "see gains", "coefficients of the difference equation")
    numbers(group, "share", [rung.share], "1", "of the target's gain")
    margins = [rung.gain_margin, rung.phase_margin, rung.sensitivity]
    numbers(group, "margins", margins, "dB, deg, 1", "lowest gain and phase margin, highest peak sensitivity")
    if rung.expected is not None:
        _put_expected(group.create_group("expected"), rung.expected, rig)


def _put_expected(group: h5py.Group, expected: Expected, rig: Rig) -> None:
    unit = rig.response_unit
    numbers(group, "setpoint", [expected.setpoint_from, expected.setpoint_to], unit, "from, to")
    _put_spread(group, "peak", expected.peak, unit, "reading farthest along the step")
    _put_spread(group, "final", expected.final, unit, "reading at rest")
    _put_spread(group, "overshoot", expected.overshoot, "1", "of the step")
    _put_spread(group, "rise_time", expected.rise_time, "s", "from 10 % to 90 %")
    _put_spread(group, "settling_time", expected.settling_time, "s", "into 2 %")
    _put_spread(group, "command", expected.command, rig.command_unit, "reading farthest from the one at rest")
    numbers(group, "response_time", [expected.response_time], "s", "unit of patience of the abort criteria")
    _put_band(group.create_group("band"), expected.band, rig)


def _put_spread(group: h5py.Group, name: str, spread: Spread, unit: str, description: str) -> None:
    text = f"{description}: fitted plant, then the ends of 95 % of the plausible plants; NaN: never"
    numbers(group, name, [spread.predicted, spread.low, spread.high], unit, text)


def _put_band(group: h5py.Group, band: Band, rig: Rig) -> None:
    numbers(group, "time", band.time, "s", "from the step on")
    numbers(group, "response", band.response, rig.response_unit, "of the fitted plant")
    numbers(group, "low", band.low, rig.response_unit, "lower end of 99.9 %, plants and noise")
    numbers(group, "high", band.high, rig.response_unit, "upper end of 99.9 %, plants and noise")
