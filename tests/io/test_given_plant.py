"""[plant] instead of fit runs: textbook plants through a rig file, their stable gains, and what is refused."""

import json
import math
from pathlib import Path

import jsonschema
import numpy as np
import pytest
from gainwright.ident.errors import RequestError
from gainwright.io.commands.main import main
from gainwright.io.deliver import deliver
from gainwright.io.job import process_rig
from gainwright.io.rigfile.load import load_rig
from gainwright.io.sheet import sheet_of

SCHEMA = json.loads((Path(__file__).parent / "gain_sheet.schema.json").read_text("utf-8"))
HEAD = '[rig]\nname = "known"\n'


def given(folder: Path, plant: str, rest: str = "") -> Path:
    """A rig file with this [plant] and nothing logged."""
    path = folder / "rig.toml"
    path.write_text(f"{HEAD}[plant]\n{plant}\n{rest}", "utf-8")
    return path


def outcome_of(folder: Path, plant: str, rest: str = ""):
    """The job done."""
    return process_rig(given(folder, plant, rest))


# Critical gains of P. Exact values by Routh's criterion; the books print them rounded (from memory where no edition is
# public): Ogata, Modern Control Engineering, ex. 6-1: 6; a textbook's public companion file, ex. 7.24.7: 48 and 7.24.4:
# 146.25; Franklin, Powell and Emami-Naeini, sec. 5.2: 256 (here k = 1/((s+4)^2+16)/s).
# Kuo; Ogata, Discrete-Time Control Systems, 1/(s(s+1)) at T = 1 s: min[(1-a)/b0, 2(1+a)/(b1-b0)] = 2.392211.
# Dead time alone: e^{-Ls}/s: pi/(2L); e^{-Ls}/(Ts+1), L = T: 2.261826 (w L + atan w T = pi).
# K/s at T with one more sample of delay, z^2 - z + K T: 1/T.
A = math.exp(-1.0)
CRITICAL = {
    "three real poles": ("numerator = [1.0]\ndenominator = [1.0, 3.0, 2.0, 0.0]", "", 6.0),
    "poles at 0, -2, -4": ("numerator = [1.0]\ndenominator = [1.0, 6.0, 8.0, 0.0]", "", 48.0),
    "a pair of complex poles": ("numerator = [1.0]\ndenominator = [1.0, 8.0, 29.0, 52.0, 0.0]", "", 146.25),
    "the other pair": ("numerator = [1.0]\ndenominator = [1.0, 8.0, 32.0, 0.0]", "", 256.0),
    "integrator with dead time": (
        'numerator = [1.0]\ndenominator = [1.0, 0.0]\ndead_time = "500 ms"', "", math.pi,
    ),
    "lag with dead time": (
        'numerator = [1.0]\ndenominator = [2.0, 1.0]\ndead_time = "2 s"', "", 2.261826,
    ),
    "sampled motor": (
        "numerator = [1.0]\ndenominator = [1.0, 1.0, 0.0]", '[controller]\nupdate_interval = "1 s"', 2.392211,
    ),
    "sampled integrator": (
        "numerator = [1.0]\ndenominator = [1.0, 0.0]", '[controller]\nupdate_interval = "0.5 s"', 4.0,
    ),
    "one sample late": (
        "numerator = [1.0]\ndenominator = [1.0, 0.0]",
        '[controller]\nupdate_interval = "0.5 s"\ncomputation_delay = "0.5 s"', 2.0,
    ),
}  # fmt: skip


@pytest.mark.parametrize("name", CRITICAL)
def test_with_nothing_asked_the_intervals_are_all_stable_gains_of_p(name, tmp_path) -> None:
    """From zero to the critical gain of the books, to their digits and far beyond where the law is exact."""
    plant, controller, critical = CRITICAL[name]
    outcome = outcome_of(tmp_path, plant, controller)
    selection = outcome.design.selection
    assert outcome.design.gains.structure == "P"
    exact = critical in (6.0, 48.0, 146.25, 256.0, math.pi, 4.0, 2.0)
    assert len(selection.intervals) == 1
    assert selection.intervals[0][0] == 0.0
    assert selection.intervals[0][1] == pytest.approx(critical, rel=1e-10 if exact else 5e-7)
    assert 0.0 < selection.loop_gain < critical
    # 20 % more gain, and poles that are slower: the share of the plausible plants can't stand as much
    assert selection.intervals_plausible[0][1] < critical


def test_an_unstable_plant_has_stable_gains_between_two_ends(tmp_path) -> None:
    """e^{-Ls}/(s-1): K > 1, and below the gain at the frequency with atan(w) = w L; L = 0.2 s solved by bisection."""
    low, high = 1.0, 20.0
    for _ in range(200):
        middle = 0.5 * (low + high)
        low, high = (middle, high) if math.atan(middle) > 0.2 * middle else (low, middle)
    plant = 'numerator = [1.0]\ndenominator = [1.0, -1.0]\ndead_time = "0.2 s"\ntolerance = { gain = "5 %" }'
    outcome = outcome_of(tmp_path, plant)
    assert len(outcome.design.selection.intervals) == 1
    assert outcome.design.selection.intervals[0] == pytest.approx((1.0, math.hypot(1.0, low)), rel=1e-9)
    assert outcome.design.all_stable


def test_a_conditionally_stable_loop_has_its_two_intervals(tmp_path) -> None:
    """(s^2+2s+4)/(s(s+4)(s+6)(s^2+1.4s+1)): 0 to 15.6 and 67.5 to 163.6 (Ogata, sec. 6-5, read off a graph).

    Exact by the roots of Routh's array: the even and odd parts of the polynomial on s = j w are solved for K here.
    """
    bottom = np.polymul(np.polymul([1.0, 4.0, 0.0], [1.0, 6.0]), [1.0, 1.4, 1.0])
    # Im[D(jw) conj N(jw)] = 0
    j = 1j ** np.arange(5, -1, -1)
    top = np.array([1.0, 2.0, 4.0]) * 1j ** np.arange(2, -1, -1)
    product = np.polymul(bottom * j, np.conj(top))
    w = np.roots(product.imag)
    w = np.sort(w[(np.abs(w.imag) < 1e-9) & (w.real > 1e-6)].real)
    gains = -(np.polyval(bottom, 1j * w) / np.polyval([1.0, 2.0, 4.0], 1j * w)).real
    plant = f"numerator = [1.0, 2.0, 4.0]\ndenominator = {bottom.tolist()}"
    none = 'tolerance = { gain = "0 %", dead_time = "0 %", poles = "0 %" }'
    intervals = outcome_of(tmp_path, f"{plant}\n{none}").design.selection.intervals
    assert [edge for pair in intervals for edge in pair] == pytest.approx([0.0, *np.sort(gains)], rel=1e-10)
    assert np.sort(gains) == pytest.approx([15.6, 67.5, 163.6], rel=0.01)


AXIS = """
[signals]
command = { unit = "V" }
response = { unit = "mm" }
[controller]
update_interval = "10 ms"
[requirements]
test_step = "5 mm"
overshoot = { at_most = "10 %" }
settling_time = { at_most = "3 s" }
[limits]
command = { lowest = "-50 V", highest = "50 V" }
response = { lowest = "-50 mm", highest = "50 mm" }
"""


@pytest.fixture(scope="module")
def axis(tmp_path_factory):
    """A double integrator with dead time, sampled, delivered."""
    folder = tmp_path_factory.mktemp("axis")
    path = given(folder, 'numerator = [1.0]\ndenominator = [1.0, 0.0, 0.0]\ndead_time = "20 ms"', AXIS)
    return deliver(path, folder / "out", with_report=True), folder


def test_a_double_integrator_gets_a_derivative_and_only_a_held_out_run_is_missing(axis) -> None:
    """P and PI can't; PD can. Everything holds on the plausible plants, but nothing was measured."""
    outcome, folder = axis
    assert outcome.design.gains.structure == "PD"
    assert outcome.design.reasons == ()
    assert outcome.status == "held"
    assert len(outcome.reasons) == 1
    assert "held-out" in outcome.reasons[0]
    sheet = json.loads((folder / "out" / "gains.json").read_text("utf-8"))
    jsonschema.validate(sheet, SCHEMA)
    assert sheet["plant"]["parameters"]["gain"]["unit"] == "mm/(V s^2)"
    assert sheet["candidate"]["controller"]["difference_equation"]["update_interval"] == 0.01


def test_the_tolerance_makes_the_plausible_plants(axis) -> None:
    """Gain within 20 %, dead time within 20 %, the corners among them; both integrators stay where they are."""
    plants = axis[0].fit.plausible.plants
    gains, delays = np.array([p.static_gain for p in plants]), np.array([p.dead_time for p in plants])
    assert len(plants) >= 1000
    assert (gains.min(), gains.max()) == pytest.approx((0.8, 1.2), rel=1e-12)
    assert (delays.min(), delays.max()) == pytest.approx((0.016, 0.024), rel=1e-12)
    assert {p.integrators for p in plants} == {2}


def test_an_earlier_sheet_gives_the_plant(axis, tmp_path) -> None:
    """Plant, units and operating point come from it; the tolerance is the rig file's."""
    sheet = axis[1] / "out" / "gains.json"
    tail = AXIS.replace('[signals]\ncommand = { unit = "V" }\nresponse = { unit = "mm" }\n', "")
    rig = load_rig(given(tmp_path, f'sheet = "{sheet}"\ntolerance = {{ gain = "5 %" }}', tail))
    assert rig.given.plant == axis[0].fit.plant
    assert (rig.command_unit, rig.response_unit) == ("V", "mm")
    assert rig.given.tolerance.gain == pytest.approx(0.05)
    assert (rig.operating_command, rig.operating_response) == (0.0, 0.0)


def test_a_continuous_controller_has_no_difference_equation(tmp_path) -> None:
    """PI on a lag with dead time, no update interval: K by the condition without hold, and null in the sheet."""
    rest = '[requirements]\ntest_step = "1"\novershoot = { at_most = "10 %" }\nsettling_time = { at_most = "2 s" }'
    plant = 'numerator = [2.0]\ndenominator = [1.0, 1.0]\ndead_time = "0.1 s"\n'
    outcome = outcome_of(tmp_path, plant + 'tolerance = { gain = "5 %", dead_time = "5 %", poles = "5 %" }', rest)
    design, s = outcome.design, outcome.design.selection.pole
    gains = design.gains
    assert design.reasons == ()
    loop = (s + gains.integral / gains.proportional) / s * 2.0 / (s + 1.0) * np.exp(-0.1 * s)
    assert np.degrees(np.angle(-loop)) == pytest.approx(0.0, abs=1e-6)
    assert 1.0 / abs(loop) == pytest.approx(design.selection.loop_gain, rel=1e-9)
    sheet = sheet_of(outcome)
    assert sheet["candidate"]["controller"]["difference_equation"] is None
    jsonschema.validate(sheet, SCHEMA)


def test_a_continuous_controller_has_a_ladder_too(tmp_path) -> None:
    """PI on a lag with dead time: each rung's lowest gain margin is at most the fitted plant's, worked out from phase.

    The plausible plants lie about 5 % around it: a gain, a dead time or a pole 15 % off costs at most 4 dB together.
    """
    rest = '[requirements]\ntest_step = "1"\novershoot = { at_most = "10 %" }\nsettling_time = { at_most = "6 s" }'
    plant = 'numerator = [2.0]\ndenominator = [1.0, 1.0]\ndead_time = "0.1 s"\n'
    outcome = outcome_of(tmp_path, plant + 'tolerance = { gain = "5 %", dead_time = "5 %", poles = "5 %" }', rest)
    rows = sheet_of(outcome)["ladder"]
    assert [row["rung"] for row in rows] == list(range(len(rows)))
    assert len(rows) >= 3
    w = np.geomspace(1.0, 40.0, 200_001)
    for row in rows[1:]:
        assert row["difference_equation"] is None
        parts = row["forms"]["parallel"]
        p, i = parts["proportional"]["value"], parts["integral"]["value"]
        loop = (p + i / (1j * w)) * 2.0 / (1j * w + 1.0) * np.exp(-0.1j * w)
        crossing = np.argmin(np.abs(np.unwrap(np.angle(loop)) + np.pi))
        margin = -20.0 * np.log10(abs(loop[crossing]))
        assert margin - 4.0 < row["lowest_gain_margin"] <= margin + 0.01
    assert rows[-1]["forms"] == sheet_of(outcome)["candidate"]["controller"]["forms"]


def test_the_continuous_step_is_that_of_the_loop_itself(tmp_path) -> None:
    """Overshoot and settling beside Runge-Kutta on the delay equation itself in steps of 0.5 ms: within 1e-3."""
    rest = '[requirements]\ntest_step = "1"\novershoot = { at_most = "10 %" }\nsettling_time = { at_most = "2 s" }'
    plant = 'numerator = [2.0]\ndenominator = [1.0, 1.0]\ndead_time = "0.1 s"\n'
    outcome = outcome_of(tmp_path, plant + 'tolerance = { gain = "1 %", dead_time = "1 %", poles = "1 %" }', rest)
    gains, step = outcome.design.gains, 5e-4
    late = round(0.1 / step)
    y = np.zeros(20_000)
    u = np.zeros(20_000)
    total = 0.0
    for k in range(y.size - 1):
        error = 1.0 - y[k]
        u[k] = gains.proportional * (gains.setpoint_weight - y[k]) + gains.integral * total
        total += step * error - 0.5 * step * (0.0 if k < 1 else y[k] - y[k - 1])  # the error falls within the step
        force = 2.0 * (u[k - late] if k >= late else 0.0)
        ahead = 2.0 * (u[k - late + 1] if k + 1 >= late else 0.0)
        middle = 0.5 * (force + ahead) if k >= late else 0.0
        y[k + 1] = y[k] * math.exp(-step) + middle * (1.0 - math.exp(-step))
    settled = (np.flatnonzero(np.abs(y - 1.0) > 0.02)[-1] + 1) * step
    predicted = {each.requirement.name: each.predicted for each in outcome.design.judged}
    assert predicted["overshoot"] == pytest.approx(max(y.max() - 1.0, 0.0), abs=1e-3)
    assert predicted["settling_time"] == pytest.approx(settled, rel=5e-3)


def test_command_noise_without_a_record_is_not_called_met(tmp_path) -> None:
    """Nobody knows the noise: the reason says so, and the other requirements are designed for."""
    asked = AXIS.replace("[limits]", 'command_noise = { at_most = "1 V" }\n[limits]')
    path = given(tmp_path, 'numerator = [1.0]\ndenominator = [1.0, 0.0, 0.0]\ndead_time = "20 ms"', asked)
    reasons = process_rig(path).reasons
    assert any("command noise is asked for, and no record tells the noise" in reason for reason in reasons)


REFUSED = {
    "no denominator": ("numerator = [1.0]", "", r"plant.denominator: this key is missing"),
    "more zeros than poles": ("numerator = [1.0, 0.0, 1.0]\ndenominator = [1.0, 1.0]", "", r"higher degree"),
    "no pole": ("numerator = [1.0]\ndenominator = [2.0]", "", r"without any pole"),
    "nothing but zeros": ("numerator = [0.0]\ndenominator = [1.0, 1.0]", "", r"plant.numerator: the polynomial is"),
    "a differentiating plant": ("numerator = [1.0, 0.0]\ndenominator = [1.0, 1.0]", "", r"zero at the origin"),
    "given twice": ('numerator = [1.0]\nsheet = "gains.json"', "", r"sheet"),
    "no such sheet": ('sheet = "nothing.json"', "", r"plant.sheet: no such gain sheet[\s\S]*nothing.json"),
    "dead time without a unit": (
        'numerator = [1.0]\ndenominator = [1.0, 1.0]\ndead_time = "1"', "", r"plant.dead_time: the unit is missing",
    ),
    "tolerance of more than all": (
        'numerator = [1.0]\ndenominator = [1.0, 1.0]\ntolerance = { gain = "100 %" }', "", r"plant.tolerance.gain",
    ),
    "no test step": (
        "numerator = [1.0]\ndenominator = [1.0, 1.0]",
        '[requirements]\nsettling_time = { at_most = "1 s" }', r"requirements.test_step: this key is missing",
    ),
}  # fmt: skip


@pytest.mark.parametrize("name", REFUSED)
def test_what_is_wrong_with_a_given_plant_is_said_under_its_key(name, tmp_path) -> None:
    """One clear error, exit code 2."""
    plant, rest, words = REFUSED[name]
    path = given(tmp_path, plant, rest)
    with pytest.raises(RequestError, match=words):
        load_rig(path)
    assert main(["process", str(path), "--no-report"]) == 2


def test_fit_runs_beside_a_given_plant_are_refused(tmp_path) -> None:
    """Nothing would be fitted from them."""
    (tmp_path / "a.csv").write_text("t,u,y\n0,0,0\n1,1,1\n", "utf-8")
    runs = (
        '[signals]\ntime = { source = "t", unit = "s" }\ncommand = { source = "u", unit = "V" }\n'
        'response = { source = "y", unit = "V" }\n[[runs]]\nfile = "a.csv"\nuse = "fit"\n'
    )
    path = given(tmp_path, "numerator = [1.0]\ndenominator = [1.0, 1.0]", runs)
    with pytest.raises(RequestError, match=r"runs\[1\].use: there is a \[plant\] already"):
        load_rig(path)


def held_out_run(path: Path, gain: float) -> None:
    """60 s of a lag (T = 1 s, dead time 0.2 s) under steps of the command, in closed form, with a little noise."""
    time = np.arange(0.0, 60.0, 0.05)
    command, response = np.zeros(time.size), np.zeros(time.size)
    for start, size in ((2.0, 1.0), (12.0, -2.0), (24.0, 1.5), (36.0, -1.0), (48.0, 1.0)):
        command += size * (time >= start)
        response += gain * size * (1.0 - np.exp(-np.clip(time - start - 0.2, 0.0, None)))
    response += np.random.default_rng(4).normal(0.0, 0.01, time.size)
    rows = "\n".join(f"{t:.3f},{u:.3f},{y:.5f}" for t, u, y in zip(time, command, response, strict=True))
    path.write_text(f"t,u,y\n{rows}\n", "utf-8")


@pytest.mark.parametrize(("gain", "status"), [(2.1, "released"), (3.5, "held")])
def test_a_held_out_run_settles_whether_a_given_plant_is_the_rig(gain, status, tmp_path) -> None:
    """A rig 5 % off the given plant agrees and releases; one of 75 % more gain disagrees."""
    held_out_run(tmp_path / "held.csv", gain)
    rest = """
[signals]
time = { source = "t", unit = "s" }
command = { source = "u", unit = "V" }
response = { source = "y", unit = "mm" }
[[runs]]
file = "held.csv"
use = "held-out"
[controller]
update_interval = "50 ms"
structures = ["PI"]
[requirements]
test_step = "1 mm"
overshoot = { at_most = "15 %" }
settling_time = { at_most = "4 s" }
[limits]
command = { lowest = "-5 V", highest = "5 V" }
command_rate = "not limited"
response = { lowest = "-10 mm", highest = "10 mm" }
response_rate = "not limited"
"""
    plant = 'numerator = [2.0]\ndenominator = [1.0, 1.0]\ndead_time = "0.2 s"'
    outcome = outcome_of(tmp_path, plant, rest)
    assert outcome.status == status, outcome.reasons
    assert outcome.closing[0].verdict == ("agrees" if status == "released" else "disagrees")
