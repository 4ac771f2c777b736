"""Identification on records of physical rigs, against what their READMEs say plain least squares found.

The records are not part of the repository: they are looked for in ../shared/data beside the checkout, or in the folder
that GAINWRIGHT_RECORDS names.
"""

import os
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from gainwright.ident.catalogue import CATALOGUE, LAG, RESONANCE
from gainwright.ident.identify import identify
from gainwright.ident.run import Run
from gainwright.ident.simulate import free_run

RECORDS = Path(os.environ.get("GAINWRIGHT_RECORDS", Path(__file__).resolve().parents[3] / "shared" / "data"))


def record(name, *, start=None, stop=None, **known):
    """One record, or samples start to stop of it."""
    path = RECORDS / name
    if not path.is_file():
        message = f"{path} is not there: set GAINWRIGHT_RECORDS to the folder of the real records"
        if os.environ.get("CI"):
            pytest.fail(message)
        pytest.skip(message)
    table = np.genfromtxt(path, delimiter=",", skip_header=1)[start:stop]
    return Run(name, table[:, 0] - table[0, 0], table[:, 1], table[:, 2], **known)


def values(fit):
    """Parameters by name."""
    return {parameter.name: parameter.value for parameter in fit.parameters}


def held_out_misfit(fit, run, start):
    """Free run over the whole record, judged from sample `start` on: rms error over the response's deviation there."""
    predicted = free_run(fit.plant, replace(run, between=fit.between), fit.operating_command, fit.operating_response)
    error = (run.response - predicted)[start:]
    return float(np.sqrt(np.mean(error**2)) / np.std(run.response[start:]))


def test_the_hot_air_duct_has_the_gain_and_misfit_of_its_readme():
    """README: gain 0.93 (two lags) to 0.96 (one), lags 0.28 and 0.11 s, 11.0 % on the first half.

    Its dead time is 0.167 s with two lags and 0.22 s with one, the command held. The record itself speaks for a
    straight command, half an interval (0.04 s) later, yet not surely: the interval holds both. The two lags share their
    sum more surely than each is known: 0.39 s, to 5 %.
    """
    whole = identify([record("hair_dryer/hair_dryer.csv")])
    assert 0.93 <= values(whole)["gain"] <= 0.96
    assert 0.17 <= values(whole)["dead time"] <= 0.22
    assert whole.structure == "two lags"
    assert whole.misfit == pytest.approx(0.11, abs=0.005)
    half = identify([record("hair_dryer/hair_dryer.csv", stop=500)])
    assert half.misfit == pytest.approx(0.110, abs=0.002)
    found = values(half)
    assert found["time constant 1"] + found["time constant 2"] == pytest.approx(0.39, rel=0.05)
    dead_time = next(p for p in half.parameters if p.name == "dead time")
    assert dead_time.low < 0.167 < dead_time.high
    held = identify([replace(record("hair_dryer/hair_dryer.csv", stop=500), between="held")])
    assert values(held)["dead time"] == pytest.approx(0.167, abs=0.01)
    run = record("hair_dryer/hair_dryer.csv")
    assert held_out_misfit(half, run, 500) == pytest.approx(0.142, abs=0.006)


def test_the_lamp_and_plate_are_two_lags_with_a_zero_as_their_readme_says():
    """README: two lags with a zero leave 2.9 % of the first half and 18.3 % of the second; a single lag 7.3 and 30.6 %.

    The prediction of the second half hangs on the slow lag, which half a record shows to some ten per cent.
    """
    half = identify([record("lamp_heater/lamp_heater.csv", stop=400, command_before=6.0)])
    assert half.structure == "two lags with zero"
    assert half.misfit < 0.029
    assert 0 < values(half)["time constant 2"] < values(half)["zero time"] < values(half)["time constant 1"]
    whole = record("lamp_heater/lamp_heater.csv", command_before=6.0)
    assert held_out_misfit(half, whole, 400) == pytest.approx(0.183, abs=0.02)


def test_the_lamp_and_plate_are_fitted_as_a_single_lag_as_well_as_one_can():
    """README: gain 19.6 degC/V, lag 70 s, 7.3 % on the first half and 30.6 % on the second; 6 V before the record."""
    half = identify(
        [record("lamp_heater/lamp_heater.csv", stop=400, command_before=6.0, at_rest=True)], structures=[LAG]
    )
    assert values(half)["gain"] == pytest.approx(19.6, abs=0.3)
    assert values(half)["time constant"] == pytest.approx(70.0, abs=1.5)
    assert half.misfit == pytest.approx(0.073, abs=0.005)
    whole = record("lamp_heater/lamp_heater.csv", command_before=6.0, at_rest=True)
    assert held_out_misfit(half, whole, 400) == pytest.approx(0.306, abs=0.01)


def test_one_model_of_the_lamp_that_leaves_so_much_unexplained_is_not_called_certain():
    """The residual of 7 % is slow: intervals from half the record must hold the answer of the whole one."""
    half, whole = (
        identify([record("lamp_heater/lamp_heater.csv", stop=stop, command_before=6.0, at_rest=True)], structures=[LAG])
        for stop in (400, None)
    )
    for one, other in zip(half.parameters, whole.parameters, strict=True):
        assert one.low <= other.value <= one.high, one.name
    assert half.drift


def test_the_circuit_under_a_square_wave_has_unit_gain_and_its_slow_pole():
    """README: gain 0.990, lag 5.50 ms, dead time 0.314 ms, misfit 0.7 %."""
    fit = identify([record("rcrc_circuit/square_wave.csv")], structures=[LAG])
    assert values(fit)["gain"] == pytest.approx(0.990, abs=0.005)
    assert values(fit)["time constant"] == pytest.approx(5.5e-3, abs=1e-4)
    assert values(fit)["dead time"] == pytest.approx(0.314e-3, abs=0.03e-3)
    assert fit.misfit == pytest.approx(0.007, abs=0.001)


def test_the_random_levels_log_of_the_circuit_is_one_sample_later_than_the_square_wave():
    """README: dead times of 1.31 and 0.314 ms, a shift of one sample between the logs; first 4096 samples of each."""
    square = identify([record("rcrc_circuit/square_wave.csv", stop=4096)], structures=[LAG])
    levels = identify([record("rcrc_circuit/prbs.csv", stop=4096)], structures=[LAG])
    late = values(levels)["dead time"] - values(square)["dead time"]
    assert late == pytest.approx(1.0e-3, abs=0.05e-3)
    assert values(levels)["gain"] == pytest.approx(0.986, abs=0.005)


def test_the_electronic_resonator_needs_a_straight_command_between_samples():
    """README: 68.4 Hz, damping 0.047, gain 1.05 interpolated, 2.6 % fitted and 7.5 % held out; command held: 24 %."""
    run = record("silverbox/arrow_low_amplitude.csv")
    half = identify([record("silverbox/arrow_low_amplitude.csv", stop=6000)], structures=[RESONANCE])
    assert half.between == "interpolated"
    found = values(half)
    assert found["natural frequency"] / (2 * np.pi) == pytest.approx(68.4, abs=0.1)
    assert found["damping ratio"] == pytest.approx(0.047, abs=0.001)
    assert found["gain"] == pytest.approx(1.05, abs=0.01)
    assert half.misfit == pytest.approx(0.026, abs=0.001)
    assert held_out_misfit(half, run, 6000) == pytest.approx(0.075, abs=0.002)
    held = identify([replace(run, between="held")], structures=[RESONANCE])
    assert held.misfit == pytest.approx(0.24, abs=0.02)


def test_the_resonator_is_called_a_resonance_among_all_structures():
    """First 1500 samples, every structure tried; a zero at a sixth of its period is seen too, and misses less."""
    run = record("silverbox/arrow_low_amplitude.csv", stop=1500)
    fit = identify([run], structures=CATALOGUE)
    assert fit.structure.startswith("resonance")
    assert values(fit)["natural frequency"] / (2 * np.pi) == pytest.approx(68.4, abs=0.3)
    assert fit.misfit <= identify([run], structures=[RESONANCE]).misfit * (1 + 1e-6)
