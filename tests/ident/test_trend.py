"""Drift across dates against the straight line by hand."""

import numpy as np
import pytest
from gainwright.ident.confront import Change
from gainwright.ident.trend import trends


def seen(values, error=0.01):
    """One parameter, as four records say it."""
    return [(Change("gain", float(np.exp(v)), v / error, v, error),) for v in values]


def test_a_line_is_found_with_its_interval():
    """0, 0.01, 0.02, 0.03 at days 0, 10, 20, 30 with 0.001 each: slope 0.001, error 0.001/sqrt(500) with Sxx = 500;
    Student's t with 2 degrees of freedom is 4.3027 at 95 % (tables).
    """
    (line,) = trends([0.0, 10.0, 20.0, 30.0], seen([0.0, 0.01, 0.02, 0.03], 0.001))
    assert line.per_day == pytest.approx(0.001, rel=1e-9)
    assert (line.high - line.low) / 2 == pytest.approx(4.3027 * 0.001 / np.sqrt(500.0), rel=1e-4)
    assert line.drifting


def test_records_that_scatter_more_than_they_say_make_the_line_unsure():
    """The same slope with jumps of ten errors about it: no drift is claimed."""
    (line,) = trends([0.0, 10.0, 20.0, 30.0], seen([0.0, 0.02, 0.01, 0.03], 0.001))
    assert line.per_day == pytest.approx(0.0008, rel=1e-9)
    assert not line.drifting


def test_a_common_offset_is_no_drift():
    """All records differ from the sheet alike."""
    (line,) = trends([0.0, 10.0, 20.0, 30.0], seen([0.05, 0.0501, 0.0499, 0.05], 0.001))
    assert abs(line.per_day) < 1e-5
    assert not line.drifting


def test_two_dates_are_too_few():
    """A line through two points says nothing of its own error."""
    assert trends([0.0, 0.0, 10.0], seen([0.0, 0.01, 0.02])) == ()
