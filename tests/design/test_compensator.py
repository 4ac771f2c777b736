"""K times the shape is the compensator of the contract, for every structure and both signs."""

import numpy as np
import pytest
from gainwright.design.compensator import loop_gain, loop_gain_unit, open_loop, shape_of, with_loop_gain
from gainwright.design.gains import Gains
from gainwright.design.requirements import ControllerSetting
from gainwright.ident.plant import Plant

S = np.array([0.3j, 1.0 + 2.0j, 15.0j, -0.4 + 0.1j])


@pytest.mark.parametrize(
    "gains",
    [
        Gains("P", 0.7),
        Gains("I", integral=0.3),
        Gains("PI", -0.7, -0.3),
        Gains("PD", 0.7, derivative=0.2, filter_time=0.03),
        Gains("PID", 0.7, 0.3, 0.2, 0.03),
        Gains("PID", -0.7, -0.3, -0.2, 0.03),
    ],
)
def test_k_times_the_shape_is_the_parallel_form(gains):
    """P + I/s + D s/(Tf s + 1), the numerator of the shape with leading coefficient one."""
    shape = shape_of(gains)
    found = loop_gain(gains) * np.polyval(shape.numerator, S) / np.polyval(shape.denominator, S)
    lag = gains.filter_time
    expected = gains.proportional + gains.integral / S + gains.derivative * S / (lag * S + 1)
    assert found == pytest.approx(expected, rel=1e-12)
    assert shape.numerator[0] == 1.0


def test_another_k_leaves_the_zeros_alone():
    """Twice the K: the same shape."""
    gains = Gains("PID", 0.7, 0.3, 0.2, 0.03)
    doubled = with_loop_gain(gains, 2 * loop_gain(gains))
    assert shape_of(doubled).numerator == pytest.approx(shape_of(gains).numerator)
    assert doubled.integral == pytest.approx(0.6)


def test_the_open_loop_carries_the_sign_and_both_delays():
    """A negative plant under negative gains: G_L is positive at rest side, with dead time and computation delay."""
    loop = open_loop(Gains("P", -2.0), Plant((-3.0,), (0.5, 1.0), 0.1), ControllerSetting(0.02, 0.005))
    s = 1.5j
    hold = (1 - np.exp(-s * 0.02)) / (s * 0.02)
    assert complex(loop.at(s)) == pytest.approx(3.0 / (0.5 * s + 1) * np.exp(-s * 0.105) * hold, rel=1e-12)


@pytest.mark.parametrize(
    ("structure", "command", "response", "expected"),
    [
        ("PI", "V", "mm", "V/mm"),
        ("I", "V", "mm", "V/(mm s)"),
        ("PID", "V", "mm", "V s/mm"),
        ("P", "1", "mm", "1/mm"),
        ("PD", "1", "1", "s"),
        ("P", "mm/s", "mm", "(mm/s)/mm"),
    ],
)
def test_the_unit_of_k_follows_from_the_structure(structure, command, response, expected):
    """In text, compound units in brackets."""
    assert loop_gain_unit(structure, command, response) == expected
