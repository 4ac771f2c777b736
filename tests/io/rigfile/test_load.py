"""Rig files: what is read, in which units, and what is refused with which words."""

import re
from pathlib import Path

import numpy as np
import pytest
from gainwright.ident.errors import RequestError
from gainwright.io.rigfile.load import load_rig
from gainwright.io.rigfile.rig import Rig

WHOLE = """
[rig]
name = "flume paddle"
[signals]
time = { source = "time_s", unit = "s" }
command = { source = "drive_V", unit = "V" }
response = { source = "meas", unit = "mm", range = { lowest = "0 mm", highest = "300 mm" } }
[[runs]]
file = "run_1.csv"
use = "fit"
[[runs]]
file = "run_2.csv"
use = "held-out"
from = "1 s"
to = "2500 ms"
[controller]
update_interval = "5 ms"
computation_delay = "1 ms"
structures = ["P", "PI"]
[requirements]
test_step = "2 cm"
overshoot = { at_most = "10 %" }
settling_time = { at_most = "800 ms", band = "2 %" }
[limits]
command = { lowest = "-10 V", highest = "10 V" }
command_rate = { highest = "200 V/s" }
response = { lowest = "0 mm", highest = "30 cm" }
response_rate = "not limited"
"""


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """A folder with two small logs, 5 s of a ramp at 10 Hz."""
    for name in ("run_1.csv", "run_2.csv"):
        rows = "".join(f"{0.1 * k:.1f},{0.2 * k:.1f},{k}\n" for k in range(50))
        (tmp_path / name).write_text("time_s,drive_V,meas\n" + rows, encoding="utf-8")
    return tmp_path


def load(folder: Path, text: str) -> Rig:
    """Load a rig file of this text that stands in the folder."""
    path = folder / "a.toml"
    path.write_text(text, encoding="utf-8")
    return load_rig(path)


def test_every_quantity_arrives_in_signal_units_and_seconds(folder: Path) -> None:
    """2 cm is 20 mm, 800 ms is 0.8 s, 10 % is 0.1, 30 cm is 300 mm; displays keep the written unit."""
    rig = load(folder, WHOLE)
    assert rig.requirements.test_step == pytest.approx(20.0, rel=1e-15)  # closed form: 2 cm * 10 mm/cm
    settling = rig.requirements.find("settling_time")
    assert settling is not None
    assert (settling.limit, settling.band, settling.unit, settling.scale) == (0.8, 0.02, "ms", 1000.0)
    overshoot = rig.requirements.find("overshoot")
    assert overshoot is not None
    assert overshoot.limit == 0.1
    assert (rig.limits.response_highest, rig.limits.response_rate) == (300.0, np.inf)
    assert rig.limits.command_rate == 200.0
    assert (rig.setting.update_interval, rig.setting.computation_delay) == (0.005, 0.001)
    assert rig.setting.structures == ("P", "PI")
    assert (rig.runs[1].from_s, rig.runs[1].to_s, rig.runs[1].use) == (1.0, 2.5, "held-out")
    assert (rig.signals["response"].lowest, rig.signals["response"].highest) == (0.0, 300.0)


def test_the_name_of_the_rig_file_does_not_matter(folder: Path) -> None:
    """The same text under two names gives the same rig, but for the file itself."""
    first = load(folder, WHOLE)
    (folder / "mirror.loose").write_text(WHOLE, encoding="utf-8")
    second = load_rig(folder / "mirror.loose")
    assert first.runs == second.runs
    assert first.sha256 == second.sha256


def test_per_cent_of_steady_state_error_is_of_the_step(folder: Path) -> None:
    """1 % of a step of -20 mm is 0.2 mm."""
    text = WHOLE.replace('"2 cm"', '"-20 mm"').replace("[limits]", 'steady_state_error = { at_most = "1 %" }\n[limits]')
    item = load(folder, text).requirements.find("steady_state_error")
    assert item is not None
    assert item.limit == pytest.approx(0.2, rel=1e-12)
    assert item.limit * item.scale == pytest.approx(1.0, rel=1e-12)


def test_celsius_is_a_difference_in_steps_and_a_temperature_in_limits(folder: Path) -> None:
    """With a response in K: a step of 20 degC is 20 K, a limit of 200 degC is 473.15 K (definition of the scale)."""
    text = WHOLE.replace('unit = "mm", range = { lowest = "0 mm", highest = "300 mm" }', 'unit = "K"')
    text = text.replace('"2 cm"', '"20 degC"').replace('lowest = "0 mm", highest = "30 cm"', 'highest = "200 degC"')
    text = text.replace("[requirements]", '[operating_point]\nresponse = "68 degF"\n[requirements]')
    rig = load(folder, text)
    assert rig.requirements.test_step == pytest.approx(20.0, rel=1e-12)
    assert rig.limits.response_highest == pytest.approx(473.15, rel=1e-12)
    assert rig.operating_response == pytest.approx(293.15, rel=1e-9)  # 68 degF = 20 degC


def test_a_unit_left_out_is_learned_from_the_first_log(folder: Path) -> None:
    """The header "pos [cm]" gives the response's unit; 20 mm is then 2 cm."""
    (folder / "run_1.csv").write_text("t [s];u [V];pos [cm]\n" + "".join(f"{k};{k};{k}\n" for k in range(9)), "utf-8")
    text = WHOLE.replace('"time_s", unit = "s"', '"t"').replace('"drive_V", unit = "V"', '"u"')
    text = text.replace('source = "meas", unit = "mm"', 'source = "pos"').replace('"2 cm"', '"20 mm"')
    rig = load(folder, text)
    assert (rig.command_unit, rig.response_unit) == ("V", "cm")
    assert rig.requirements.test_step == pytest.approx(2.0, rel=1e-12)
    assert rig.signals["response"].highest == pytest.approx(30.0, rel=1e-12)


def test_patterns_expand_sorted_and_guesses_are_listed(folder: Path) -> None:
    """run_*.csv names both logs in order; every table with guessed = true is listed by its key."""
    text = re.sub(r'\[\[runs\]\]\nfile = "run_2.*?\n\[con', "[con", WHOLE, flags=re.DOTALL)
    text = text.replace("run_1.csv", "run_*.csv").replace('unit = "s" }', 'unit = "s", guessed = true }')
    rig = load(folder, text)
    assert [run.shown for run in rig.runs] == ["run_1.csv", "run_2.csv"]
    assert rig.guessed == ("signals.time",)


def test_a_run_overrides_signals_key_by_key(folder: Path) -> None:
    """A run may name another source and take the setpoint away; the rest stays as [signals] has it."""
    text = WHOLE.replace(
        '[[runs]]\nfile = "run_2.csv"\nuse = "held-out"',
        'setpoint = { source = "meas", unit = "mm" }\n[[runs]]\nfile = "run_2.csv"\nuse = "held-out"',
        1,
    )
    text = text.replace("setpoint = { source", "# setpoint = { source").replace(
        "[controller]", '[runs.signals]\nresponse = { source = "pos" }\nsetpoint = false\n[controller]'
    )
    text = text.replace("[[runs]]", 'setpoint = { source = "target", unit = "mm" }\n[[runs]]', 1)
    rig = load(folder, text)
    assert rig.runs[0].signals["setpoint"].source == "target"
    assert "setpoint" not in rig.runs[1].signals
    assert (rig.runs[1].signals["response"].source, rig.runs[1].signals["response"].unit) == ("pos", "mm")


def test_windows_of_one_file_may_touch(folder: Path) -> None:
    """Half-open windows: 0 to 2 s and 2 s to the end share no sample."""
    text = WHOLE.replace('file = "run_1.csv"\nuse = "fit"', 'file = "run_2.csv"\nuse = "fit"\nto = "1 s"')
    assert len(load(folder, text).runs) == 2


def test_a_missing_held_out_run_and_present_gains_are_no_error(folder: Path) -> None:
    """Both are legal: the sheet will be held, the gains in force are carried."""
    text = WHOLE.replace('use = "held-out"', 'use = "fit"').replace(
        "[requirements]", '[controller.current]\nproportional = "0.4 V/mm"\nintegral = "2 V/(mm s)"\n[requirements]'
    )
    assert {run.use for run in load(folder, text).runs} == {"fit"}


# each case: what is replaced, by what, and what the message must say
CASES: dict[str, tuple[str, str, str]] = {
    "unknown table": ("[limits]", "[limit]", r'limit: unknown key[\s\S]*did you mean "limits"'),
    "unknown key in a table": ("update_interval", "update_intervall", r"update_intervall[\s\S]*unknown key"),
    "nearest key is said": ("computation_delay", "compute_delay", r'did you mean "computation_delay"'),
    "misspelt requirement": ("settling_time", "settle_time", r'did you mean "settling_time"'),
    "at_least for an upper bound": (
        "overshoot = { at_most",
        "overshoot = { at_least",
        r"overshoot.at_least[\s\S]*unknown key",
    ),
    "a run without its use": ('use = "fit"\n', "", r'runs\[1\].use: this key is missing[\s\S]*"fit" or "held-out"'),
    "unknown word for use": (
        'use = "held-out"',
        'use = "heldout"',
        r'runs\[2\].use: not a known word[\s\S]*"held-out"',
    ),
    "unknown structure": ('"PI"]', '"IP"]', r'controller.structures\[2\]: not a known word[\s\S]*"IP"'),
    "empty list of structures": ('["P", "PI"]', "[]", r"controller.structures"),
    "bare number for a time": ('"5 ms"', "0.005", r"update_interval: a quantity is a text with its unit[\s\S]*0.005"),
    "time without a unit": ('"5 ms"', '"5"', r'update_interval: the unit is missing[\s\S]*"5 s"'),
    "unknown unit": ('"5 ms"', '"5 mss"', r'unknown unit[\s\S]*"mss"[\s\S]*"ms"'),
    "wrong kind of unit": ('"5 ms"', '"5 mm"', r'wrong kind of unit[\s\S]*"mm"[\s\S]*"s"'),
    "zero interval": ('"5 ms"', '"0 ms"', r"update_interval: must be above zero"),
    "negative delay": ('"1 ms"', '"-1 ms"', r"computation_delay: too small"),
    "decimal comma": ('"5 ms"', '"5,0 ms"', r"decimal point"),
    "not a number": ('"5 ms"', '"fast"', r"not a number with a unit"),
    "an infinite number": ('"5 ms"', '"1e400 s"', r"the number is too large"),
    "missing interval": ('update_interval = "5 ms"', "", r"controller.update_interval: this key is missing"),
    "missing controller": (
        WHOLE[WHOLE.index("[controller]") : WHOLE.index("[requirements]")],
        "",
        r"controller: this key is missing",
    ),
    "missing signal": ('command = { source = "drive_V", unit = "V" }', "", r"signals.command: this key is missing"),
    "unit of a signal unknown": ('unit = "V"', 'unit = "Vlt"', r'signals.command.unit: unknown unit[\s\S]*"Vlt"'),
    "ambiguous unit": ('unit = "V"', 'unit = "C"', r"two meanings[\s\S]*degC"),
    "unit of the time is no time": ('unit = "s"', 'unit = "Hz"', r"signals.time.unit: wrong kind of unit"),
    "rpm is no frequency": ('unit = "s"', 'unit = "rpm"', r"signals.time.unit: wrong kind of unit"),
    "range upside down": (
        'lowest = "0 mm", highest = "300 mm"',
        'lowest = "300 mm", highest = "0 mm"',
        r"signals.response.range: lowest must be below highest",
    ),
    "limits upside down": (
        'lowest = "-10 V", highest = "10 V"',
        'lowest = "10 V", highest = "-10 V"',
        r"limits.command: lowest must be below highest[\s\S]*lowest 10, highest -10",
    ),
    "limits equal": (
        'lowest = "-10 V", highest = "10 V"',
        'lowest = "1 V", highest = "1 V"',
        r"limits.command: lowest must be below highest",
    ),
    "limit in the other signal's unit": (
        'highest = "10 V"',
        'highest = "10 mm"',
        r"limits.command.highest: wrong kind",
    ),
    "rate without a time": ('"200 V/s"', '"200 V"', r"limits.command_rate.highest: wrong kind of unit"),
    "not limited misspelt": ('"not limited"', '"unlimited"', r"limits.response_rate"),
    "overshoot without per cent": ('"10 %"', '"10"', r"overshoot.at_most: this must be in per cent"),
    "overshoot as a number": ('"10 %"', "0.1", r"overshoot.at_most: a quantity is a text with its unit"),
    "negative overshoot": ('"10 %"', '"-1 %"', r"overshoot.at_most: too small"),
    "band in mm": ('band = "2 %"', 'band = "2 mm"', r"settling_time.band: this must be in per cent"),
    "band too wide": ('band = "2 %"', 'band = "80 %"', r"settling_time.band: too large"),
    "missing test step": ('test_step = "2 cm"', "", r"requirements.test_step: this key is missing[\s\S]*overshoot"),
    "test step of zero": ('"2 cm"', '"0 mm"', r"test_step: a step of zero"),
    "test step in volts": ('"2 cm"', '"2 V"', r"requirements.test_step: wrong kind of unit"),
    "confidence above one": ("[limits]", 'confidence = "105 %"\n[limits]', r"confidence: too large"),
    "confidence as a number": ("[limits]", "confidence = 0.95\n[limits]", r"confidence: a quantity is a text"),
    "damping ratio as a text": (
        "[limits]",
        'damping_ratio = { at_least = "0.6" }\n[limits]',
        r"damping_ratio.at_least",
    ),
    "damping ratio above one": (
        "[limits]",
        "damping_ratio = { at_least = 6.0 }\n[limits]",
        r"damping_ratio[\s\S]*range",
    ),
    "peak sensitivity below one": ("[limits]", "peak_sensitivity = { at_most = 0.9 }\n[limits]", r"above 1"),
    "margin without dB": (
        "[limits]",
        'gain_margin = { at_least = "6" }\n[limits]',
        r"gain_margin.at_least: the unit is",
    ),
    "phase margin in dB": (
        "[limits]",
        'phase_margin = { at_least = "45 dB" }\n[limits]',
        r"phase_margin[\s\S]*wrong kind",
    ),
    "ramp without a rate": (
        "[limits]",
        'ramp_error = { at_most = "1 mm", ramp = "10 mm" }\n[limits]',
        r"ramp_error.ramp",
    ),
    "disturbance without its step": (
        "[limits]",
        'disturbance_peak = { at_most = "1 mm" }\n[limits]',
        r"disturbance_peak.command_step: this key is missing",
    ),
    "no such file": (
        "run_1.csv",
        "run_one.csv",
        r'runs\[1\].file: no such file[\s\S]*"run_one.csv"[\s\S]*did you mean "run_',
    ),
    "pattern without a match": ("run_1.csv", "rune_*.csv", r"runs\[1\].file: this pattern matches no file"),
    "a folder as a log": ("run_1.csv", ".", r"this is a folder"),
    "no run to fit": ('use = "fit"', 'use = "held-out"', r"no run is there to be fitted"),
    "overlapping windows": ("run_1.csv", "run_2.csv", r"runs\[2\]: this window of run_2.csv overlaps with runs\[1\]"),
    "window ends before it begins": ('"2500 ms"', '"0.5 s"', r"runs\[2\].to: the window ends before it begins"),
    "negative window": ('"1 s"', '"-1 s"', r"runs\[2\].from: too small"),
    "steady command in the wrong unit": (
        'from = "1 s"',
        'from = "1 s"\nbefore = { command = "6 mm" }',
        r"runs\[2\].before.command: wrong kind",
    ),
    "a table without columns": ('from = "1 s"', 'excitation = "frequency-table"', r"runs\[2\].frequency: this"),
    "a table's column in a log": ('from = "1 s"', 'phase = { source = "p" }', r"runs\[2\].phase: only a freq"),
    "a given plant beside fit runs": (
        "[limits]",
        "[plant]\nnumerator = [1.0]\ndenominator = [1.0, 1.0]\n[limits]",
        r"runs\[1\].use: there is a \[plant\] already",
    ),
    "unknown key of a given plant": ("[limits]", "[plant]\nnumerators = [1.0]\n[limits]", r'did you mean "numerator"'),
    "scale of zero": ('unit = "V" }', 'unit = "V", scale = 0.0 }', r"signals.command.scale: a scale of zero"),
    "scale as a text": ('unit = "V" }', 'unit = "V", scale = "2" }', r"signals.command.scale: this is a bare number"),
    "neither source nor rate": ('source = "time_s", ', "", r"signals.time: needs a source"),
    "both source and rate": (
        'source = "time_s"',
        'source = "time_s", sample_rate = "1 kHz"',
        r"signals.time: needs a source",
    ),
    "rate in seconds": ('source = "time_s", unit = "s"', 'sample_rate = "1 s"', r"sample_rate: wrong kind"),
    "a source that isn't in the log": (
        'source = "meas", unit = "mm"',
        'source = "measure"',
        r'not in the log[\s\S]*did you mean "meas"',
    ),
    "no unit anywhere": ('source = "meas", unit = "mm"', 'source = "meas"', r"signals.response.unit: neither"),
    "separator of two signs": ("[signals]", '[log]\nseparator = ";;"\n[signals]', r"log.separator"),
    "separator and decimal alike": ("[signals]", '[log]\nseparator = ","\ndecimal = ","\n[signals]', r"log.decimal"),
    "unknown encoding": ("[signals]", '[log]\nencoding = "utf-9"\n[signals]', r"log.encoding: unknown encoding"),
    "gains in force in the wrong unit": (
        "[requirements]",
        '[controller.current]\nintegral = "2 V/mm"\n[requirements]',
        r"controller.current.integral: wrong kind",
    ),
    "not TOML": ("[limits]", "[limits\n", r"a.toml, line \d+, column \d+: the rig file is not TOML"),
    "a key twice": ('test_step = "2 cm"', 'test_step = "2 cm"\ntest_step = "3 cm"', r"line \d+[\s\S]*not TOML"),
}


@pytest.mark.parametrize("case", CASES)
def test_a_wrong_rig_file_is_refused_with_its_key(case: str, folder: Path) -> None:
    """Each case says the key, what is wrong and what would be right."""
    old, new, message = CASES[case]
    assert old in WHOLE
    with pytest.raises(RequestError, match=message) as caught:
        load(folder, WHOLE.replace(old, new, 1))
    assert "a.toml" in caught.value.text


def test_several_errors_are_said_at_once(folder: Path) -> None:
    """Three wrong values give one error that names all three keys."""
    text = WHOLE.replace('"5 ms"', '"5 mm"').replace('"10 %"', '"10"').replace('"200 V/s"', '"200 V"')
    with pytest.raises(RequestError, match="3 things are wrong") as caught:
        load(folder, text)
    for key in ("controller.update_interval", "requirements.overshoot.at_most", "limits.command_rate.highest"):
        assert key in caught.value.text


def test_a_rig_file_that_is_not_there_or_not_utf8_is_refused(folder: Path) -> None:
    """The path and the line are named."""
    with pytest.raises(RequestError, match=r"missing\.toml: the rig file can't be read"):
        load_rig(folder / "missing.toml")
    (folder / "latin.toml").write_bytes(b'[rig]\nname = "\xfcbung"\n')
    with pytest.raises(RequestError, match=r"latin\.toml, line 2: the rig file is not UTF-8"):
        load_rig(folder / "latin.toml")
