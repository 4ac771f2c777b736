"""Long lines lose points, never extremes."""

import numpy as np
from gainwright.io.figures.thin import thin_band, thin_line


def test_a_single_spike_in_a_million_samples_survives():
    """One sample high and one low, in 10^6 of a quiet signal."""
    time = np.arange(1e6) * 1e-3
    values = np.sin(time)
    values[123_456], values[654_321] = 9.0, -7.0
    shown_time, shown = thin_line(time, values)
    assert len(shown) <= 1000
    assert (shown.max(), shown.min()) == (9.0, -7.0)
    assert shown_time[np.argmax(shown)] == time[123_456]


def test_points_stay_in_order_of_time_and_are_samples_of_the_line():
    """Nothing is averaged or moved."""
    rng = np.random.default_rng(5)
    time, values = np.cumsum(rng.uniform(0.1, 1.0, 5000)), rng.normal(size=5000)
    shown_time, shown = thin_line(time, values)
    assert np.all(np.diff(shown_time) > 0)
    assert np.array_equal(shown, values[np.searchsorted(time, shown_time)])


def test_a_gap_of_lost_samples_stays_a_gap():
    """10 % of the samples lost in the middle: the line breaks there and nowhere else."""
    time = np.arange(20_000) * 0.01
    values = np.cos(time)
    values[9000:11_000] = np.nan
    shown_time, shown = thin_line(time, values)
    lost = shown_time[np.isnan(shown)]
    assert lost.size > 0
    assert lost.min() >= time[9000]
    assert lost.max() < time[11_000]


def test_a_short_line_is_left_as_it_is():
    """Fewer points than there are pixels."""
    time = np.arange(100.0)
    shown_time, shown = thin_line(time, time**2)
    assert np.array_equal(shown_time, time)
    assert np.array_equal(shown, time**2)


def test_a_thinned_band_still_holds_the_whole_band():
    """Its edges never lie inside the edges they stand for."""
    time = np.linspace(0.0, 1.0, 10_001)
    low, high = np.sin(90 * time) - 1.0, np.sin(90 * time) + 1.0
    shown_time, shown_low, shown_high = thin_band(time, low, high)
    assert len(shown_time) <= 250
    assert np.all(np.interp(time, shown_time, shown_high)[20:-20] >= high[20:-20] - 0.25)
    assert (shown_low.min(), shown_high.max()) == (low.min(), high.max())
    assert (shown_time[0], shown_time[-1]) == (0.0, 1.0)
