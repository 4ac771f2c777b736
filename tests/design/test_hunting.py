"""A loop round a valve that sticks: the simulation against one written out here, and what is judged with it."""

import numpy as np
import pytest
from gainwright.design.discretise import columns_of
from gainwright.design.gains import Gains
from gainwright.design.hunting import hunting
from gainwright.design.judge import judge_plants
from gainwright.design.requirements import ControllerSetting, Limits, Requirement, Requirements
from gainwright.design.situation import situation_of
from gainwright.design.values import bench_of, values_of
from gainwright.ident.fitted import Plausible
from gainwright.ident.plant import Plant

INTERVAL, STEP = 0.1, 1.0
PLANT = Plant((2.0,), (1.0, 1.0), 0.3)
ERROR = Requirement("steady_state_error", 0.02 * STEP, "at_most")
SETTLING = Requirement("settling_time", 8.0, "at_most", "s", band=0.02)


def written_out(gains, valve, duration, parts=50):
    """PI by the trapezoidal rule round the valve, then a lag behind 0.3 s, in steps of a fiftieth of a sample."""
    stick, slide, above = valve
    h = INTERVAL / parts
    keep = np.exp(-h)
    y = u = stem = integral = last = 0.0
    pipe = [0.0] * round(0.3 / h)
    out = []
    for k in range(round(duration / h)):
        if k % parts == 0:
            error = STEP - y
            integral += gains.integral * INTERVAL * 0.5 * (error + last)
            last = error
            u = gains.proportional * error + integral
            if abs(u + above - stem) > stick:
                stem = u + above - np.sign(u + above - stem) * slide
        pipe.append(stem)
        y = keep * y + 2.0 * (1.0 - keep) * pipe.pop(0)
        out.append(y)
    return np.array(out)


def plausible(valves):
    """The same plant behind each valve."""
    rows = np.asarray(valves, dtype=float)
    count = len(rows)
    return Plausible((PLANT,) * count, np.zeros(count), np.zeros(count), rows)


def asked(items):
    """What the loop is judged for: a step of 1 mm by a controller of 0.1 s."""
    return {
        "operating_command": 0.0,
        "operating_response": 0.0,
        "noise": None,
        "requirements": Requirements(items=tuple(items), test_step=STEP),
        "limits": Limits(),
        "setting": ControllerSetting(update_interval=INTERVAL),
    }


@pytest.mark.parametrize("valve", [(0.0, 0.0, 0.0), (0.04, 0.04, 0.0), (0.04, 0.01, 0.0), (0.06, 0.02, 0.03)])
def test_the_loop_with_a_valve_runs_as_one_written_out_step_by_step(valve):
    """PI round 2/(s + 1) exp(-0.3 s): the response at the samples agrees to rounding, jumps of the valve included."""
    gains, seen = Gains("PI", 0.6, 0.6), []
    situation = situation_of(**asked([ERROR]))
    bench = bench_of(plausible([valve]), situation, 30.0, points=1)
    one = columns_of([gains]).take(np.zeros(1, dtype=int))
    values_of(bench, np.zeros(1, dtype=int), one, watch=lambda chosen, before, history: seen.append(history.response))
    there = written_out(gains, valve, 30.0)[49::50]
    assert np.allclose(seen[0][: there.size, 0], there, atol=1e-9)


def test_integral_action_round_a_jumping_valve_hunts_and_is_judged_as_it_hunts():
    """Jumps of 0.06 V move the response by up to 0.06 mm either way: neither 2 % of error nor 2 % of band is kept."""
    gains = Gains("PI", 0.6, 0.6)
    verdicts = judge_plants(gains, plausible([(0.083, 0.021, 0.0), (0.0, 0.0, 0.0)]), **asked([ERROR, SETTLING]))
    tail = written_out(gains, (0.083, 0.021, 0.0), verdicts.horizon)
    farthest = np.abs(STEP - tail[-tail.size // 5 :]).max()
    assert farthest > 0.03
    assert verdicts.values["steady_state_error"][0] == pytest.approx(farthest, rel=0.02)
    assert verdicts.meets_all.tolist() == [False, True]
    assert np.isinf(verdicts.values["settling_time"][0])


def test_a_small_band_passes():
    """A play of 0.002 V is far below what is asked."""
    verdicts = judge_plants(Gains("PI", 0.6, 0.6), plausible([(0.002, 0.002, 0.0)]), **asked([ERROR, SETTLING]))
    assert verdicts.meets_all.all()


def test_how_far_it_hunts_is_told_with_the_band():
    """The number is that of the simulation written out here; without a valve nothing is told."""
    gains, valves = Gains("PI", 0.6, 0.6), [(0.083, 0.021, 0.0)] * 3
    request = situation_of(**asked([ERROR, SETTLING]))
    told = hunting(gains, PLANT, plausible(valves), request)
    there = written_out(gains, valves[0], 40.0)
    assert told.away[0] == pytest.approx(np.abs(STEP - there[there.size // 2 :]).max(), rel=0.05)
    assert told.band[0] == pytest.approx(0.083)
    assert told.share == 1.0
    assert "0.083 V" in told.reason(("V", "mm"), True)
    assert hunting(gains, PLANT, Plausible((PLANT,), np.zeros(1), np.zeros(1)), request) is None
