"""Further forms of the same gains: by hand, back and forth for all gains, and with a reason where one doesn't exist."""

import numpy as np
import pytest
from gainwright.design import further_forms as ff
from gainwright.design.forms import forms_of
from gainwright.design.gains import Gains
from hypothesis import given
from hypothesis import strategies as st

SPANS = ff.Spans(command=20.0, response=300.0)
NAMES = ["standard, minutes", "standard, repeats", "per sample", "proportional band", "zeros"]


def forms(gains, interval=0.5, spans=SPANS):
    return ff.further_forms(gains, "V", "mm", interval, spans)


def numbers(form):
    return {name: (quantity.value, quantity.unit) for name, quantity in form.items()}


def test_each_form_by_hand():
    """P 2 V/mm, I 0.1 V/(mm s), D 6 V s/mm, Tf 0.6 s: Ti 20 s, Td 3 s; T 0.5 s; band 100 * 20/(300 * 2) %."""
    found = forms(Gains("PID", 2.0, 0.1, 6.0, 0.6))
    assert list(found) == NAMES
    assert numbers(found["standard, minutes"]) == {
        "gain": (2.0, "V/mm"), "integral_time": (pytest.approx(1 / 3), "min"), "derivative_time": (0.05, "min"),
        "derivative_filter_time": (0.01, "min"),
    }  # fmt: skip
    repeats = numbers(found["standard, repeats"])
    assert repeats["repeats_per_second"] == (0.05, "1/s")
    assert repeats["repeats_per_minute"] == (3.0, "1/min")
    assert repeats["derivative_time"] == (3.0, "s")
    assert numbers(found["per sample"]) == {
        "proportional": (2.0, "V/mm"), "integral_per_sample": (0.05, "V/mm"), "derivative_per_sample": (12.0, "V/mm"),
        "filter_samples": (pytest.approx(1.2), "samples"), "sample": (0.5, "s"),
    }  # fmt: skip
    assert numbers(found["proportional band"])["proportional_band"] == (pytest.approx(10 / 3), "%")


def test_the_proportional_band_moves_the_command_over_its_range():
    """The definition (common practice): an error of the band's share of the response's range moves P over all of it."""
    band = forms(Gains("P", -0.4))["proportional band"]["proportional_band"].value
    assert abs(-0.4 * band / 100.0 * 300.0) == pytest.approx(20.0)


def test_the_zeros_are_those_of_the_compensator():
    """Roots of (D + P Tf) s^2 + (P + I Tf) s + I by numpy, the slow one first."""
    found = forms(Gains("PID", 3.0, 0.8, 1.1, 0.05))["zeros"]
    roots = sorted(-np.roots([1.1 + 3.0 * 0.05, 3.0 + 0.8 * 0.05, 0.8]).real)
    assert (found["zero"].value, found["second_zero"].value) == pytest.approx(roots, rel=1e-12)
    assert found["loop_gain"].unit == "V s/mm"
    assert (found["loop_gain"].value, found["zero"].unit) == (pytest.approx(1.25), "1/s")


def test_a_form_that_does_not_exist_says_why():
    """No proportional part, no range, no samples, complex zeros, a network."""
    alone = forms(Gains("I", integral=2.0))
    for name in ("standard, minutes", "standard, repeats", "proportional band"):
        assert alone[name] == ff.Missing("there is no proportional part")
    band = forms(Gains("P", 1.0), spans=ff.Spans(20.0, None))["proportional band"]
    assert band == ff.Missing("the rig file states no [signals] response range")
    assert "continuous" in forms(Gains("P", 1.0), interval=None)["per sample"].why
    assert forms(Gains("PID", 1.0, 1.0, 1.0))["zeros"] == ff.Missing("the zeros are complex")
    lead = forms(Gains("lead", 4.0, zero=2.0, pole=9.0))
    assert {type(found) for found in lead.values()} == {ff.Missing}


@pytest.mark.parametrize(
    "gains",
    [
        Gains("P", 1.0), Gains("I", integral=2.0), Gains("PI", 1.0, 2.0), Gains("PD", 1.0, 0.0, 0.3, 0.1),
        Gains("PID", 1.0, 1.0, 1.0), Gains("PID", 2.0, 0.1, 6.0, 0.6), Gains("lag", 4.0, zero=2.0, pole=0.1),
    ],
)  # fmt: skip
def test_the_four_forms_are_there_or_have_a_reason(gains):
    """Exactly one of the two, for each of them."""
    missing = {name for name, form in forms_of(gains, "V", "mm").items() if form is None}
    assert set(ff.why_missing(gains)) == missing


size, share = st.floats(1e-3, 1e3), st.floats(0.02, 0.9)


@given(
    structure=st.sampled_from(["P", "PI", "PD", "PID"]), gain=size, ti=size, td=share, lag=share,
    interval=st.floats(1e-4, 10.0), sign=st.sampled_from([-1.0, 1.0]),
)  # fmt: skip
def test_every_form_leads_back_to_the_gains(structure, gain, ti, td, lag, interval, sign):
    """To rounding, whatever the size, for all structures with a proportional part and real zeros."""
    integral = gain / ti if "I" in structure else 0.0
    derivative = gain * td * ti / 8.0 if "D" in structure else 0.0
    filter_time = lag * td * ti / 8.0 if "D" in structure else 0.0
    gains = Gains(structure, sign * gain, sign * integral, sign * derivative, filter_time)
    found = forms(gains, interval)
    back = {
        "standard, minutes": ff.from_minutes(found["standard, minutes"], structure),
        "standard, repeats": ff.from_repeats(found["standard, repeats"], structure),
        "per sample": ff.from_per_sample(found["per sample"], structure),
        "proportional band": ff.from_proportional_band(found["proportional band"], SPANS, structure, sign=sign),
        "zeros": ff.from_zeros(found["zeros"], structure),
    }
    wanted = (gains.proportional, gains.integral, gains.derivative, gains.filter_time)
    for again in back.values():
        assert again.structure == structure
        assert (again.proportional, again.integral, again.derivative, again.filter_time) == pytest.approx(
            wanted, rel=1e-11, abs=1e-13 * abs(gain)
        )
