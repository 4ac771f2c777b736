"""A fresh record against an earlier fit: silent where nothing changed, right in name and size where something did."""

import numpy as np
import pytest
import step_sums
from gainwright.ident.catalogue import INTEGRATOR, LAG, RESONANCE
from gainwright.ident.confront import confront
from gainwright.ident.identify import identify
from gainwright.ident.run import Run

TIME = 0.1 * np.arange(200)
FIT = ((2.0, 1.0), (8.0, -1.0), (14.0, 0.5))
FRESH = ((3.0, -1.0), (11.0, 0.5))


def log(step, gain, dead_time, seed, *, profile=FRESH, level=5.0, noise=0.04, time=TIME, drift=0.0):
    """A record with first-order noise of rho = 0.7."""
    rng = np.random.default_rng(seed)
    command = step_sums.steps(time, profile, 0.0)
    clean = step_sums.response(step, gain, dead_time, time, command, 0.0)
    return Run("fresh", time, command, level + drift * time + clean + step_sums.coloured(rng, len(time), noise, 0.7))


@pytest.fixture(scope="module")
def lag_fit():
    """Gain -2, lag 1 s, dead time 0.43 s."""
    return identify([log(step_sums.lag(1.0), -2.0, 0.43, 1, profile=FIT)], structures=[LAG])


@pytest.fixture(scope="module")
def resonance_fit():
    """6 rad/s, damping ratio 0.03, gain 1."""
    return identify([log(step_sums.resonance(6.0, 0.03), 1.0, 0.1, 2, profile=FIT)], structures=[RESONANCE])


def changes(confronted):
    """By name."""
    return {change.name: change for change in confronted.changes}


def test_p_values_of_an_unchanged_plant_are_evenly_spread():
    """16 pairs of records, each pair fitted afresh.

    Of 16 even p values more than two lie below 0.01 with a chance of 0.05 %, and all above 0.4 with 0.03 %; their mean
    has a standard error of 0.072 about 0.5, and four of these are allowed.
    """
    p_values = []
    for seed in range(16):
        fit = identify([log(step_sums.lag(1.0), -2.0, 0.43, 200 + seed, profile=FIT)], structures=[LAG])
        p_values.append(confront(log(step_sums.lag(1.0), -2.0, 0.43, 300 + seed), fit).p_value)
    assert np.sum(np.array(p_values) < 0.01) <= 2
    assert min(p_values) < 0.4
    assert np.mean(p_values) == pytest.approx(0.5, abs=0.29)


def test_a_level_that_moved_is_no_change_of_the_plant(lag_fit):
    """Another level of the response, even a large one, is the operating point's business."""
    found = confront(log(step_sums.lag(1.0), -2.0, 0.43, 3, level=40.0), lag_fit)
    assert found.p_value > 0.01


@pytest.mark.parametrize("factor", [1.3, 0.75])
def test_a_changed_gain_is_named_with_its_size(lag_fit, factor):
    """Ratio within 5 %; dead time and lag are not accused."""
    found = confront(log(step_sums.lag(1.0), -2.0 * factor, 0.43, 4), lag_fit)
    assert found.p_value < 1e-6
    gain = changes(found)["gain"]
    assert gain.ratio == pytest.approx(factor, rel=0.05)
    assert np.sign(gain.score) == np.sign(factor - 1)
    assert abs(gain.score) > 5 > max(abs(changes(found)[name].score) for name in ("dead time", "time constant"))


def test_a_gain_of_the_other_sign_is_a_change(lag_fit):
    """A swapped cable: same size, other sign. The logarithm of the size alone would see nothing."""
    found = confront(log(step_sums.lag(1.0), 2.0, 0.43, 5), lag_fit)
    assert found.p_value < 1e-6
    assert changes(found)["gain"].ratio == pytest.approx(-1.0, rel=0.05)


def test_a_doubled_dead_time_is_named_with_its_size(lag_fit):
    """0.43 s more; the ratio counts against dead time and lag together, 1.43 s."""
    found = confront(log(step_sums.lag(1.0), -2.0, 0.86, 7), lag_fit)
    assert found.p_value < 1e-6
    assert changes(found)["dead time"].ratio == pytest.approx(1 + 0.43 / 1.43, abs=0.04)
    assert changes(found)["dead time"].score > 5


def test_a_natural_frequency_six_per_cent_lower_is_named_with_its_size(resonance_fit):
    """Lightly damped: found to half a per cent."""
    found = confront(log(step_sums.resonance(6.0 * 0.94, 0.03), 1.0, 0.1, 8), resonance_fit)
    assert found.p_value < 1e-6
    assert changes(found)["natural frequency"].ratio == pytest.approx(0.94, abs=0.005)
    unchanged = confront(log(step_sums.resonance(6.0, 0.03), 1.0, 0.1, 9), resonance_fit)
    assert unchanged.p_value > 0.01


def test_an_integrating_plant_may_drift_otherwise_and_is_still_the_same():
    """Another load moves the holding command; gain and dead time are what is compared."""
    step = step_sums.integrator()
    fit = identify([log(step, 0.8, 0.43, 10, profile=FIT)], structures=[INTEGRATOR])
    assert confront(log(step, 0.8, 0.43, 11, drift=0.3), fit).p_value > 0.01
    assert confront(log(step, 0.8 * 1.3, 0.43, 12, drift=0.3), fit).p_value < 1e-4


def test_the_fresh_records_own_plants_and_noise_are_handed_on(lag_fit):
    """Plants spread about the fresh record's truth, not the old one's; its residual is the noise put in."""
    found = confront(log(step_sums.lag(1.0), -3.0, 0.43, 13), lag_fit)
    gains = [plant.static_gain for plant in found.plausible.plants]
    low, high = np.quantile(gains, [0.001, 0.999])
    assert low < -3.0 < high < -2.5
    assert len(gains) >= 1000
    assert found.noise_std == pytest.approx(0.04, rel=0.25)  # 200 samples of rho 0.7 are worth 35
