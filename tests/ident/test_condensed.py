"""Long records of steps in few rows: sums, closed form under coloured noise, and the fit, against every sample."""

import numpy as np
import pytest
from gainwright.ident.catalogue import CATALOGUE, LAG, RESONANCE, Structure
from gainwright.ident.condensed import Condensed, can_condense, condensed
from gainwright.ident.gram_blocks import lay_out, quadrature
from gainwright.ident.identify import identify
from gainwright.ident.pieces import Pieces, Places, read_off
from gainwright.ident.regression import Regression
from gainwright.ident.run import Run
from gainwright.ident.whiten import WHITE, Colour
from scipy.signal import lfilter, lfiltic

COLOURS = (WHITE, Colour(0.9), Colour(0.95, -0.6), Colour(0.5, 0.2), Colour(0.97, -0.3, 40.0))
LEVELS = np.array([0.0, 1.0, 0.2, -0.8, 0.3, 1.2, 0.0])
AT = np.array([0.0, 2.4, 6.6, 11.4, 16.5, 21.0, 25.5])
THETAS = {
    "lag": [-0.7],
    "two lags": [0.7, 0.4],
    "resonance": [1.4, -1.6],
    "integrator with lag": [-0.9],
    "integrator with lag and friction": [-0.9, -2.3, -3.0],
    "lag with zero": [-0.7],
    "two lags with zero": [0.7, 0.4],
    "resonance with zero": [1.4, -1.6],
    "resonance behind a lag": [1.4, -1.6, -1.2],
    "double integrator with lag": [-1.2],
}


def record(count, seed, lost=slice(0, 0), early=0.0):
    """A damped oscillation after each of six steps, closed form, plus white noise of 1 % of a volt."""
    time = 30.0 / count * np.arange(count)
    command = LEVELS[np.searchsorted(AT, time, side="right") - 1]
    response = np.full(count, 3.0)
    for at, step in zip(AT[1:], np.diff(LEVELS), strict=True):
        since = np.maximum(time - at - 0.11, 0.0)
        # w = 4 rad/s, z = 0.2: 1 - exp(-0.8 t)(cos d t + 0.8/d sin d t), d = 4 sqrt(0.96)
        d = 4 * np.sqrt(0.96)
        response += 1.5 * step * (1 - np.exp(-0.8 * since) * (np.cos(d * since) + 0.8 / d * np.sin(d * since)))
    response += 0.01 * np.random.default_rng(seed).standard_normal(count)
    response[lost] = np.nan
    command[: int(early)] = 0.5
    return Run("made", time, command, response, between="held")


@pytest.mark.parametrize("length", [8, 64, 4096])
def test_four_places_of_a_block_sum_every_polynomial_up_to_the_seventh_degree(length):
    """Sums of powers over 0 ... length - 1, written out; and the best cubic through a cubic is that cubic."""
    places, weights, onto = quadrature(length)
    samples = np.arange(length) / length
    for degree in range(8):
        assert np.sum(weights * (places / length) ** degree) == pytest.approx(np.sum(samples**degree), rel=1e-10)
    cubic = np.polynomial.Polynomial([3.0, 2.0, 0.5, -1.0])
    assert np.allclose(
        cubic(samples) @ onto, np.sqrt(weights) * cubic(places / length), rtol=0, atol=1e-11 * length**0.5
    )


def test_a_layout_counts_every_sample_once():
    """Weights squared are samples: two stretches, two arrivals, a ringing mode."""
    blocks = lay_out([slice(0, 40_000), slice(40_100, 90_000)], [(5_000, 5_040), (60_000, 60_010)], 64, [(0.01, 1e-3)])
    assert np.sum(blocks.weight**2) == pytest.approx(89_900)
    covered = [*blocks.single] + [k for n, first in blocks.starts.items() for f in first for k in range(f, f + n)]
    assert sorted(covered) == [*range(40_000), *range(40_100, 90_000)]
    # the ringing lives for 20,000 samples behind each of four events, four rows in 32
    assert len(blocks.at) < 10_500


@pytest.mark.parametrize("colour", COLOURS[:4], ids=str)
def test_pieces_read_off_under_colour_are_what_the_filter_makes_of_every_sample(colour):
    """A step through a lag, 1 - exp(-t/T), two events between the same samples, filtered sample by sample by scipy."""
    dt, pole = 0.01, -1 / 0.3
    start = np.array([0.0, 0.503, 0.5061, 1.2])
    flat = np.array([[0.0, 0, 0], [1.0, 0, 0], [0.4, 0.2, 0.0], [2.0, -0.3, 0.1]])
    amounts = np.array([[0.0], [-1.0], [0.3], [-2.0]], complex)
    time = dt * np.arange(300)
    piece = np.searchsorted(start, time, side="right") - 1
    since = time - start[piece]
    column = flat[piece, 0] + flat[piece, 1] * since + flat[piece, 2] * since**2
    column += amounts[piece, 0].real * np.exp(pole * since)
    ratio = colour.variance_ratio
    white = np.empty(300)
    for part in (slice(0, 120), slice(130, 300)):
        own = column[part]
        white[part.start] = own[0] / np.sqrt(ratio)
        # the innovation expected after the first sample of a stretch is that sample over the ratio
        zi = lfiltic([1.0, -colour.rho], [1.0, colour.c], [own[0] / ratio], [own[0]])
        white[part.start + 1 : part.stop] = lfilter([1.0, -colour.rho], [1.0, colour.c], own[1:], zi=zi)[0]
    kept = np.r_[0:120, 130:300]
    places = Places(kept.astype(float), np.ones(len(kept)), dt, np.array([0, 130]))
    got = read_off(Pieces(start, flat, np.array([pole], complex), amounts), places, colour)
    expected = white[kept] if colour.rho else column[kept]
    assert np.max(np.abs(got - expected)) < 1e-12


@pytest.mark.parametrize("structure", [s for s in CATALOGUE if s.name in THETAS], ids=lambda s: s.name)
def test_few_rows_give_the_least_squares_of_every_sample(structure: Structure):
    """Two runs, lost samples, one run that starts unsettled, five kinds of noise: to 1e-4 standard errors."""
    runs = (record(15_000, 1, slice(5_000, 5_040)), record(15_000, 2, early=10))
    every = Regression(runs, structure, 0.3, False)
    theta = np.array([*THETAS[structure.name], 0.1103])
    few = condensed(every, theta, 0.02, {})
    assert isinstance(few, Condensed)
    assert few.rows < 5_000
    for colour in COLOURS:
        a, b = every.solve(theta, colour), few.solve(theta, colour)
        columns = every.at(theta).columns_under(colour)
        errors = np.sqrt(a.cost / 30_000 * np.diag(np.linalg.pinv(columns.T @ columns)))
        assert abs(b.cost / a.cost - 1) < 1e-6
        assert np.max(np.abs(a.coefficients - b.coefficients) / errors) < 1e-4


def test_slopes_and_model_of_few_rows_are_those_of_every_sample():
    """Inner products of all slopes agree to 1e-6 of their size; the model does at every sample."""
    every = Regression((record(30_000, 3),), RESONANCE, 0.0, True)
    theta = np.array([1.4, -1.6, 0.1103])
    few = condensed(every, theta, 0.02, {})
    solved = every.solve(theta, COLOURS[2])
    products = [
        slopes.T @ slopes
        for slopes in (p.at(theta).slopes_under(solved.coefficients, COLOURS[2]) for p in (every, few))
    ]
    assert np.max(np.abs(products[1] - products[0])) < 1e-5 * np.max(np.abs(products[0]))
    assert np.max(np.abs(few.model(theta, solved.coefficients) - every.model(theta, solved.coefficients))) < 1e-10
    sizes = [p.least_squares_covariance(theta, solved.coefficients, COLOURS[1]) for p in (every, few)]
    assert np.allclose(np.diag(sizes[1]), np.diag(sizes[0]), rtol=1e-2)


def test_a_long_record_is_fitted_through_few_rows_and_a_busy_one_is_not():
    """60,000 samples of steps give the plant's numbers; a command that changes at every sample can't be cut short."""
    run = record(60_000, 4)
    assert can_condense(Regression((run,), LAG, 0.0, True))
    busy = Run("busy", run.time, np.random.default_rng(1).standard_normal(60_000), run.response, between="held")
    assert not can_condense(Regression((busy,), LAG, 0.0, True))
    fit = identify([run])
    assert fit.structure == "resonance"
    truth = {"gain": 1.5, "dead time": 0.11, "natural frequency": 4.0, "damping ratio": 0.2}
    for each in fit.parameters:
        # four standard errors: one of four numbers misses by that once in 4,000 seeds
        assert abs(each.value - truth[each.name]) < 4 * each.std_error
    assert fit.noise.std == pytest.approx(0.01, rel=0.02)
    assert np.isfinite(fit.runs[0].model).all()
