"""Units: conversions by definition, and everything doubtful refused."""

import pytest
from gainwright.io import units
from gainwright.io.unit_names import AMBIGUOUS, NAMES
from hypothesis import given
from hypothesis import strategies as st

# closed form: from the definitions of the units (SI brochure; international yard and pound)
FACTORS = [
    ("cm/s", "mm/ms", 0.01),
    ("V/(mm s)", "mV/mm/s", 1000.0),
    ("V s/mm", "V·s/m", 1000.0),
    ("m³/h", "L/min", 1000.0 / 60.0),
    ("rpm", "deg/s", 6.0),
    ("rev/min", "rpm", 1.0),
    ("Nm", "N m", 1.0),
    ("\N{MICRO SIGN}m", "\N{GREEK SMALL LETTER MU}m", 1.0),
    ("s^-1", "Hz", 1.0),
    ("inch", "mm", 25.4),
    ("degF", "degC", 5.0 / 9.0),
    ("degC/min", "K/s", 1.0 / 60.0),
    ("bar(g)", "psig", 1e5 / 6894.757293168),
    ("kg m2/s2", "J", 1.0),
    ("-", "1", 1.0),
]


@pytest.mark.parametrize(("unit", "wanted", "factor"), FACTORS)
def test_differences_convert_by_definition(unit: str, wanted: str, factor: float) -> None:
    """To the rounding of float64; a few operations each."""
    assert units.difference_factor(unit, wanted) == pytest.approx(factor, rel=1e-14)


@pytest.mark.parametrize(
    "unit",
    ["C", "g", "G", "S/s", "Vlt", "norm", "adc", "V/√Hz", "4-20mA", "mm'", "m/", "(m", "", "Km", "m^99", "1000", "a b"],
)
def test_doubtful_units_are_refused(unit: str) -> None:
    """What a general library would read as something, or crash on, is refused with what to write instead."""
    with pytest.raises(units.UnitError, match=r"unknown unit|two meanings|no unit") as caught:
        units.require_known(unit)
    assert caught.value.expected


@pytest.mark.parametrize(
    ("unit", "other"),
    [("%", "1"), ("counts", "1"), ("deg", "1"), ("rpm", "Hz"), ("bar", "barg"), ("rad/s", "Hz"), ("counts", "%")],
)
def test_count_per_cent_angle_and_gauge_pressure_stay_apart(unit: str, other: str) -> None:
    """None of them is a pure number, and a turn is no cycle."""
    with pytest.raises(units.UnitError, match="wrong kind of unit"):
        units.difference_factor(unit, other)


def test_readings_of_temperature_have_an_offset_and_differences_none() -> None:
    """212 degF is 100 degC (boiling water); 9 degF of difference are 5 K."""
    assert units.convert_reading(212.0, "degF", "degC") == pytest.approx(100.0, abs=1e-6)
    assert units.convert_reading(0.0, "degC", "K") == 273.15
    assert 9.0 * units.difference_factor("degF", "K") == pytest.approx(5.0, rel=1e-14)


@given(st.sampled_from(sorted(NAMES)))
def test_every_name_of_the_table_can_be_used(name: str) -> None:
    """Each converts to itself with factor one."""
    assert units.same_unit(name, name)
    assert name not in AMBIGUOUS


@given(st.floats(allow_nan=False, allow_infinity=False), st.sampled_from(["mm", "V/s", "%", "degC"]))
def test_a_written_quantity_is_read_back(value: float, unit: str) -> None:
    """The shortest decimal text of any float64 gives it back exactly."""
    assert units.read_quantity(f"{value!r} {unit}") == units.Quantity(value, unit)
