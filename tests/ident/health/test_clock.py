"""The record's clock: what is mended, and what stops."""

from collections.abc import Callable

import numpy as np
import pytest
from gainwright.ident.health.clock import Clock, mend_clock
from hypothesis import given
from hypothesis import strategies as st

COUNT = 500


def mend(stamps: np.ndarray, rows: np.ndarray | None = None) -> Clock:
    """Mend the clock of a record with two noisy signals."""
    noisy = np.random.default_rng(5).standard_normal((len(stamps), 2))
    return mend_clock(stamps, noisy if rows is None else rows)


def kinds(clock: Clock) -> dict[str, str]:
    """What was seen and what it refuses."""
    return {seen.kind: seen.refuses for seen in clock.seen}


@given(st.sampled_from([0.0001, 0.0016384, 0.005, 1.0, 60.0]), st.floats(0.0, 1e9), st.integers(3, 400))
def test_even_stamps_stay_as_they_are(interval: float, start: float, count: int) -> None:
    """Wherever they begin; within the rounding of float64 stamps of that size."""
    stamps = start + interval * np.arange(count)
    clock = mend(stamps)
    if interval >= 0.001 or start < 1e5:
        assert clock.seen == ()
    np.testing.assert_allclose(clock.time, interval * np.arange(count), atol=1e-6 * max(1.0, interval))


@pytest.mark.parametrize("interval", [0.0005, 0.0007, 0.0032, 0.01234])
@pytest.mark.parametrize("cut", [np.round, np.floor])
def test_stamps_to_the_ms_get_the_even_base_behind_them(interval: float, cut: np.ufunc) -> None:
    """Rounded or cut to 1 ms, even where two samples share a stamp: the interval comes back to 1 ms / count."""
    stamps = cut(interval * np.arange(COUNT) * 1000.0 + 0.3) / 1000.0
    clock = mend(stamps)
    assert len(clock.keep) == COUNT
    np.testing.assert_allclose(np.diff(clock.time), interval, atol=2e-3 / COUNT)
    assert kinds(clock) == {"rounded stamps": "no"}


@pytest.mark.parametrize("show", [lambda t: np.array([float(f"{x:.6g}") for x in t]), lambda t: t.astype(np.float32)])
def test_stamps_with_few_digits_get_the_even_base(show: Callable[[np.ndarray], np.ndarray]) -> None:
    """1.6384 ms sampling to six digits, or in single precision: late stamps are rounder than early ones."""
    stamps = 0.0016384 * np.arange(12000)
    clock = mend(np.asarray(show(stamps), dtype=np.float64))
    np.testing.assert_allclose(np.diff(clock.time), 0.0016384, rtol=1e-4)


def test_rounded_stamps_with_a_gap_keep_the_gap() -> None:
    """3.2 ms sampling stamped to 1 ms, forty samples missing."""
    index = np.delete(np.arange(COUNT), np.arange(200, 240))
    clock = mend(np.round(0.0032 * index, 3))
    np.testing.assert_allclose(clock.time, 0.0032 * index, atol=5e-4)
    np.testing.assert_allclose(np.diff(clock.time)[:199], 0.0032, atol=1e-5)


@pytest.mark.parametrize(("size", "name"), [(2**32 * 1e-3, "32 bit counter of ms"), (86400.0, "midnight"),
                                            (3600.0, "summer time"), (65.536, "16 bit")])  # fmt: skip
def test_known_wraps_are_added_back(size: float, name: str) -> None:
    """The clock begins again in the middle of the record."""
    even = 0.1 * np.arange(COUNT)
    clock = mend(size + even - np.where(np.arange(COUNT) >= 300, size, 0.0) - 30.0)
    np.testing.assert_allclose(clock.time, even, atol=1e-6)
    assert kinds(clock) == {"clock wraps": "no"}
    assert name in clock.seen[0].size


def test_a_clock_that_runs_backwards_stops() -> None:
    """A jump of 7 s back is no known wrap."""
    stamps = 0.1 * np.arange(COUNT)
    stamps[300:] -= 7.0
    assert kinds(mend(stamps)) == {"clock runs backwards": "stops"}


def test_a_few_late_samples_are_sorted() -> None:
    """Two rows swapped: sorted with their signals."""
    stamps = 0.1 * np.arange(COUNT)
    stamps[[100, 101]] = stamps[[101, 100]]
    clock = mend(stamps)
    assert kinds(clock) == {"samples out of order": "no"}
    assert clock.keep[[100, 101]].tolist() == [101, 100]
    np.testing.assert_allclose(clock.time, 0.1 * np.arange(COUNT), atol=1e-9)


def test_doubled_rows_are_used_once_and_a_coarse_clock_stops() -> None:
    """One row twice is mended; stamps to the second at irregular 0.1 s can't be."""
    index = np.insert(np.arange(COUNT), 100, 100)
    clock = mend(0.1 * index)
    assert kinds(clock) == {"doubled stamps": "no"}
    np.testing.assert_allclose(clock.time, 0.1 * np.arange(COUNT), atol=1e-9)
    jitter = np.cumsum(np.random.default_rng(2).uniform(0.02, 0.5, COUNT))
    assert kinds(mend(np.floor(jitter))) == {"doubled stamps": "stops"}


def test_a_file_laid_out_in_advance_ends_at_its_last_sample() -> None:
    """Zeros in every channel at the end are no samples."""
    rows = np.random.default_rng(5).standard_normal((COUNT, 2))
    stamps = 5.0 + 0.1 * np.arange(COUNT)
    stamps[450:], rows[450:] = 0.0, 0.0
    clock = mend(stamps, rows)
    assert len(clock.time) == 450
    assert kinds(clock) == {"zeros at the end": "no"}


def test_uneven_stamps_are_kept() -> None:
    """Jitter beyond rounding is real: the stamps are used."""
    stamps = 0.1 * np.arange(COUNT) + np.random.default_rng(3).uniform(-0.02, 0.02, COUNT)
    clock = mend(stamps)
    np.testing.assert_allclose(clock.time, stamps - stamps[0], atol=1e-12)
