"""A short form of the coverage campaign, and its oracle against a formula."""

import interval_coverage as coverage
import numpy as np
import pytest

SHORT = [
    coverage.Cell("lag", "AR 0.8", 25.0, 3),
    coverage.Cell("two lags", "white", 25.0, 6),
    coverage.Cell("resonance", "AR 0.5", 40.0, 1),
    coverage.Cell("integrator with lag", "AR 0.95", 25.0, 3),
]


def test_the_oracle_of_a_gain_alone_is_the_textbook_variance_of_a_difference_of_levels():
    """Gain of a step from a level before it to one after: var = s^2 (1/n1 + 1/n2) when nothing else is unknown."""
    cell = coverage.Cell("lag", "white", 25.0, 1)
    time, _, _ = coverage.clean(cell, np.array([2.0, 0.37, 1.3]))
    before = np.count_nonzero(time < 10.37)
    expected = 2 * 1.95996 * 0.1 * np.sqrt(1 / before + 1 / (len(time) - before))
    assert coverage.oracle_widths(cell, np.array([2.0, 0.37, 1.3]), 0.1)[0] == pytest.approx(expected, rel=0.05)


def test_intervals_hold_the_truth_about_as_often_as_they_say_and_are_no_wider_than_need_be():
    """48 records of four structures and colours: of 192 intervals 182 should.

    Fewer than 170 is one chance in 10,000, were all independent.
    """
    rows = [coverage.measure((cell, 12, 100)) for cell in SHORT]
    held = sum(count for row in rows for count in row["held"].values())
    asked = sum(sum(row["asked"].values()) for row in rows)
    assert held >= 0.885 * asked, [coverage.line(row) for row in rows]
    widths = [width for row in rows for width in row["width"].values()]
    assert np.median(widths) < 1.3, [coverage.line(row) for row in rows]
