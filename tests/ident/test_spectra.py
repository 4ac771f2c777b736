"""Spectra against published error formulas and window tables, and against noise of known size."""

import numpy as np
import pytest
from gainwright.ident.spectra import (
    coherence_error,
    coherence_of_chance,
    noise_bandwidth,
    overlap_correlation,
    response_error,
    spectra,
    spectrum_error,
    variance_ratio,
)


def test_random_error_of_the_response_follows_the_published_table():
    """Bendat and Piersol, Random Data (from memory), 100 averages, coherence 0.1 to 0.9; printed to three digits."""
    table = [0.212, 0.141, 0.108, 0.087, 0.071, 0.058, 0.046, 0.035, 0.024]
    assert response_error(np.arange(1, 10) / 10, 100) == pytest.approx(table, abs=5.1e-4)


def test_small_formulas_have_their_published_values():
    """Chance coherence (standard result, from memory) 0.283, 0.146, 0.030; auto-spectrum 0.10 at 100 averages."""
    assert [coherence_of_chance(n) for n in (10, 20, 100)] == pytest.approx([0.283, 0.146, 0.030], abs=5e-4)
    assert spectrum_error(100) == pytest.approx(0.1)


@pytest.mark.parametrize(
    ("window", "bins"),
    [("boxcar", 1.0), ("bartlett", 1.3333), ("hann", 1.5), ("hamming", 1.3628), ("blackmanharris", 2.0044)],
)
def test_windows_have_their_published_noise_bandwidth(window, bins):
    """Harris, Proc. IEEE 66 (1978) 51-83, table 1, as recomputed to four digits; 4096 points move the fourth."""
    assert noise_bandwidth(window) == pytest.approx(bins, abs=3e-4)


def test_overlapping_hann_segments_share_what_the_table_says():
    """Harris 1978, table 1: 16.7 % at half overlap, 65.9 % at three quarters; many averages: 1 + 2/36 (Welch 1967)."""
    assert overlap_correlation("hann", 0.5) == pytest.approx(0.1667, abs=2e-4)
    assert overlap_correlation("hann", 0.75) == pytest.approx(0.6592, abs=2e-4)
    assert variance_ratio("hann", 10_000) == pytest.approx(1 + 2 / 36, abs=1e-3)


def test_noise_on_the_command_makes_h1_low_by_its_share_and_noise_on_the_response_does_not():
    """10 % noise power on the logged command: 1/1.1 (algebra, Bendat and Piersol)."""
    rng = np.random.default_rng(4)
    clean = rng.standard_normal(200_000)
    noisy = clean + np.sqrt(0.1) * rng.standard_normal(clean.size)
    seen = spectra(noisy, 2.0 * clean, 0.01, 512)
    assert np.mean(seen.response[1:-1].real) == pytest.approx(2.0 / 1.1, rel=2e-3)
    seen = spectra(clean, 2.0 * clean + rng.standard_normal(clean.size), 0.01, 512)
    assert np.mean(seen.response[1:-1].real) == pytest.approx(2.0, rel=2e-3)


@pytest.mark.parametrize("coherence", [0.5, 0.8])
def test_the_scatter_of_h1_and_of_the_coherence_is_what_the_formulas_say(coherence):
    """400 bins of one record scatter as many records would; they know a spread to 3.5 %, correlated ones to 7 %."""
    rng = np.random.default_rng(int(10 * coherence))
    clean = rng.standard_normal(80_000)
    noise = np.sqrt(1 / coherence - 1) * rng.standard_normal(clean.size)
    seen = spectra(clean, clean + noise, 1.0, 800)
    inner = slice(2, -2)
    spread = np.std(np.abs(seen.response[inner]))
    assert spread == pytest.approx(float(response_error(np.array(coherence), seen.averages)), rel=0.15)
    away = np.std(seen.coherence[inner]) / coherence
    assert away == pytest.approx(float(coherence_error(np.array(coherence), seen.averages)), rel=0.2)
