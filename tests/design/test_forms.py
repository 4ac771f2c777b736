"""Parallel, standard and series form: published conversions, exact round trips, units, and forms that don't exist."""

import numpy as np
import pytest
from gainwright.design.forms import Timed, forms_of, from_series, from_standard, series, standard
from gainwright.design.gains import Gains
from hypothesis import given
from hypothesis import strategies as st


def test_series_to_standard_to_parallel_is_the_textbook_conversion():
    """SD-11: series (2, 8, 2) -> standard (2.5, 10, 1.6) -> parallel 2.5, 0.25, 4.0 (Åström and Hägglund 2006, 3.2)."""
    gains = from_series(Timed(2.0, 8.0, 2.0, 0.0), "PID")
    assert (gains.proportional, gains.integral, gains.derivative) == pytest.approx((2.5, 0.25, 4.0))
    form = standard(gains)
    assert (form.gain, form.integral_time, form.derivative_time) == pytest.approx((2.5, 10.0, 1.6))
    back = series(gains)
    assert (back.gain, back.integral_time, back.derivative_time) == pytest.approx((2.0, 8.0, 2.0))


def test_ultimate_cycle_pid_has_a_double_zero_and_so_just_a_series_form():
    """SD-12: Ti = 4 Td gives 6.3223 (s + 1.4235)^2/s (Ogata 5e, Ex. 8-1; numbers from memory)."""
    ti = 2.0 / 1.4235
    gain = 6.3223 * 2 * 1.4235
    form = series(from_standard(Timed(gain, ti, ti / 4, 0.0), "PID"))
    assert form is not None
    assert (form.integral_time, form.derivative_time) == pytest.approx((1 / 1.4235, 1 / 1.4235), rel=1e-6)
    assert form.gain * form.derivative_time == pytest.approx(6.3223, rel=1e-6)


def test_an_internal_model_series_rule_converts_to_the_standard_figures():
    """SD-13: series (1.30, 2, 1.2) -> standard 2.08, 3.2, 0.75 (from SD-11)."""
    form = standard(from_series(Timed(1.30, 2.0, 1.2, 0.0), "PID"))
    assert (form.gain, form.integral_time, form.derivative_time) == pytest.approx((2.08, 3.2, 0.75))


positive = st.floats(0.01, 100.0)


@given(
    gain=positive,
    ti=positive,
    share=st.floats(0.02, 0.95),
    filter_share=st.floats(0.02, 0.5),
    sign=st.sampled_from([-1, 1]),
)
def test_series_and_back_is_exact_with_a_filter(gain, ti, share, filter_share, sign):
    """The filter takes part in the match: from_series(series(x)) gives x back for every series form with Td < Ti."""
    td = share * ti
    gains = from_series(Timed(sign * gain, ti, td, filter_share * td), "PID")
    form = series(gains)
    assert form is not None
    again = from_series(form, "PID")
    found = (again.proportional, again.integral, again.derivative, again.filter_time)
    wanted = (gains.proportional, gains.integral, gains.derivative, gains.filter_time)
    assert found == pytest.approx(wanted, rel=1e-7, abs=1e-9 * gain)


def test_the_series_form_is_the_same_transfer_function_as_the_parallel_one():
    """Compared at points of the s plane with the contract's definitions written out."""
    gains = Gains("PID", 3.0, 0.8, 1.1, 0.05)
    form = series(gains)
    s = np.array([0.3j, 1.0 + 2.0j, 15.0j])
    parallel = 3.0 + 0.8 / s + 1.1 * s / (0.05 * s + 1)
    product = form.gain * (1 + 1 / (form.integral_time * s)) * (form.derivative_time * s + 1) / (0.05 * s + 1)
    assert product == pytest.approx(parallel, rel=1e-12)


def test_complex_zeros_have_no_series_form():
    """Ti < 4 Td without a filter: None, not a made-up number."""
    gains = from_standard(Timed(1.0, 3.0, 1.0, 0.0), "PID")
    assert series(gains) is None
    assert forms_of(gains, "V", "mm")["series"] is None


def test_units_stand_beside_every_number():
    """V/mm, V/(mm s), V s/mm and seconds."""
    forms = forms_of(Gains("PID", 1.0, 0.1, 0.5, 0.05), "V", "mm")
    units = {name: q.unit for name, q in forms["parallel"].items()}
    assert units == {
        "proportional": "V/mm",
        "integral": "V/(mm s)",
        "derivative": "V s/mm",
        "derivative_filter_time": "s",
    }
    assert forms["standard"]["integral_time"].unit == "s"
    assert forms["zero-pole"] is None


def test_an_integral_alone_has_no_standard_form_and_a_lead_only_its_zero_and_pole():
    """The forms that don't exist are None."""
    assert forms_of(Gains("I", integral=2.0), "V", "mm")["standard"] is None
    lead = forms_of(Gains("lead", 4.0, zero=2.0, pole=9.0), "V", "1")
    assert lead["parallel"] is None
    assert {k: (q.value, q.unit) for k, q in lead["zero-pole"].items()} == {
        "gain": (4.0, "V"),
        "zero": (2.0, "1/s"),
        "pole": (9.0, "1/s"),
    }
