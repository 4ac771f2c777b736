"""The picture of a frequency table: what it shows where."""

import numpy as np
import pytest
from gainwright.ident.plant import Plant
from gainwright.ident.tables import FittedTable
from gainwright.io.figures.frequency_table import frequency_table

PLANT = Plant((4.0,), (1.0 / 9.0, 0.04 / 3.0, 1.0), 0.05)


def fitted(phased: bool) -> FittedTable:
    """Twelve points of a resonance at 3 rad/s, exact."""
    frequency = np.geomspace(0.3, 30.0, 12)
    model = PLANT.response_at(frequency)
    phase = np.unwrap(np.angle(model)) - 2 * np.pi if phased else None  # a turn further down, as some tables have it
    error = 0.02 * np.abs(model)
    return FittedTable("table", frequency, np.abs(model), phase, error, np.full(12, 0.02), model)


@pytest.mark.parametrize("phased", [True, False])
def test_the_plant_is_drawn_between_the_points_too(phased: bool) -> None:
    """The line reaches the peak, 4/(2 z) = 100 at damping 0.02, that no point shows; phases where there are any."""
    figure = frequency_table(fitted(phased), PLANT, gain_unit="mm/V")
    size = figure.axes[0]
    line = max(size.get_lines(), key=lambda each: len(np.asarray(each.get_xdata())))
    assert np.max(np.asarray(line.get_ydata(), dtype=float)) == pytest.approx(100.0, rel=0.1)
    assert len(figure.axes) == (2 if phased else 1)
    assert "mm/V" in size.get_ylabel()
    assert "rad/s" in figure.axes[-1].get_xlabel()


def test_the_model_is_drawn_on_the_turn_of_the_points() -> None:
    """Phases given a turn lower: the line goes through them."""
    axes = frequency_table(fitted(True), PLANT, gain_unit="mm/V").axes[1]
    lines = sorted(axes.get_lines(), key=lambda each: len(np.asarray(each.get_xdata())))
    points, model = lines[0], lines[-1]
    at = np.interp(points.get_xdata(), model.get_xdata(), model.get_ydata())
    assert np.max(np.abs(at - np.asarray(points.get_ydata(), dtype=float))) < 1.0
