"""The smallest changes that break something, and whether a record could have shown them."""

from dataclasses import replace

import numpy as np
import pytest
import step_sums
from gainwright.design.closing.breaking import breaking_changes
from gainwright.design.closing.unseen import Smallest, deciding, smallest_changes, smallest_text, unseen
from gainwright.design.closing.words import Units
from gainwright.ident.catalogue import LAG
from gainwright.ident.confront import confront
from gainwright.ident.identify import identify
from gainwright.ident.run import Run
from scipy.stats import norm, t

TIME = 0.1 * np.arange(200)


def log(seed):
    """A lag of 1 s, gain 2, dead time 0.3 s, with first-order noise of rho = 0.7."""
    command = step_sums.steps(TIME, ((2.0, 1.0), (8.0, -1.0), (14.0, 0.5)), 0.0)
    clean = step_sums.response(step_sums.lag(1.0), 2.0, 0.3, TIME, command, 0.0)
    noise = step_sums.coloured(np.random.default_rng(seed), len(TIME), 0.03, 0.7)
    return Run("made", TIME, command, 5.0 + clean + noise)


@pytest.fixture(scope="module")
def fit():
    """Of one such record."""
    return identify([log(1)], structures=[LAG])


def test_the_smallest_change_is_the_one_that_was_set(fit):
    """Gains that hold on gains of 1.8 to 2.6, lags up to 1.35 s and dead times up to 0.5 s, by decree."""

    def meets(plausible):
        gains = np.array([plant.static_gain for plant in plausible.plants])
        lags = np.array([-1.0 / plant.poles[0].real for plant in plausible.plants])
        late = np.array([plant.dead_time for plant in plausible.plants])
        return (gains > 1.8) & (gains < 2.6) & (lags < 1.35) & (late < 0.5)

    centre = np.median(fit.draws, axis=0)
    found = {(each.name, each.size > 0): each for each in breaking_changes(fit, meets, 1.0)}
    truth = {
        ("time constant", True): np.log(1.35) - centre[0],
        ("dead time", True): 0.5 - centre[1],
        ("gain", True): np.log(2.6 / centre[2]),
        ("gain", False): np.log(1.8 / centre[2]),
    }
    assert set(found) == set(truth)
    for key, size in truth.items():
        # never told too small: the next step that was tried, a seventh and a bit above at most
        assert 1.0 <= found[key].size / size < 1.2, key


def test_gains_that_fail_on_the_fitted_plant_have_no_smallest_change(fit):
    """Nor do gains that nothing breaks."""
    assert breaking_changes(fit, lambda plants: np.zeros(len(plants.plants), dtype=bool), 1.0) == ()
    assert breaking_changes(fit, lambda plants: np.ones(len(plants.plants), dtype=bool), 1.0) == ()


def test_what_a_record_shows_is_the_power_of_a_one_sided_test(fit):
    """With independent errors and noise known for sure 2 x 1.645 standard errors.

    With eight degrees of freedom as drawn: a change called just visible is found by the t test in 95 % of 40,000 draws.
    """
    alone = replace(confront(log(2), fit), spread=np.diag([0.1, 0.02, 0.05]) ** 2, gain_scale=0.01, freedom=1e7)
    before = np.array([0.0, 0.3, 2.0])
    size = 2.0 * norm.ppf(0.95) * 0.02
    assert alone.visible(before, np.array([0.0, 0.3 + size, 2.0])) == pytest.approx(1.0, rel=1e-3)
    assert alone.visible(before, before * [1.0, 1.0, 1.1]) == pytest.approx(np.log(1.1) / (3.2897 * 0.05), rel=1e-3)
    few = replace(alone, freedom=8.0)
    just = 0.02 * 3.0 / few.visible(before, np.array([0.0, 0.36, 2.0]))
    draws = np.random.default_rng(5)
    z = (just / 0.02 + draws.standard_normal(40_000)) / np.sqrt(draws.chisquare(8.0, 40_000) / 8.0)
    assert np.mean(z > t.ppf(0.95, 8.0)) == pytest.approx(0.95, abs=0.005)


def test_related_parameters_are_told_apart_as_well_as_the_record_can(fit):
    """Errors that go together, r = 0.6: the other unchanged, one is seen as if its error were sqrt(1 - r^2) of it."""
    spread = np.array([[1.0, 0.6, 0.0], [0.6, 1.0, 0.0], [0.0, 0.0, 1.0]]) * 0.01**2
    alone = replace(confront(log(2), fit), spread=spread, gain_scale=0.01, freedom=1e7)
    apart = replace(alone, spread=np.eye(3) * 0.01**2)
    before, after = np.array([0.0, 0.3, 2.0]), np.array([0.02, 0.3, 2.0])
    assert alone.visible(before, after) / apart.visible(before, after) == pytest.approx(1.0 / 0.8, rel=1e-3)


def test_hidden_changes_are_named_with_their_size(fit):
    """One seen, two hidden; the worst seen first."""
    changes = (Smallest("dead time", 0.12, 0.4), Smallest("gain", -0.25, 0.9), Smallest("gain", 0.5, 1.8))
    assert unseen(changes) == changes[:2]
    told = smallest_text(changes, Units("V", "mm"))
    assert told == (
        "the run would have shown (95 %) these smallest changes that break something: gain +50 %; it could not have "
        "shown (95 %) dead time +0.12 s, gain -25 %, which break something too"
    )
    assert smallest_text((), Units("V", "mm")) == ""


def test_sizes_are_told_as_people_have_them(fit):
    """A logarithm of 0.1 is 10.5 %; a dead time stays in s."""
    alone = confront(log(2), fit)
    found = breaking_changes(fit, lambda plants: np.array([p.static_gain < 2.4 for p in plants.plants]), 1.0)
    (smallest,) = smallest_changes(found, alone)
    assert smallest.size == pytest.approx(np.expm1(found[0].size))
    assert smallest.visible > 1.0


def test_friction_is_told_and_decides_nothing():
    """A hidden change of friction stands in the text; alone it refuses no run."""
    changes = (Smallest("friction forward", 0.49, 0.3), Smallest("gain", -0.25, 0.9), Smallest("gain", 0.5, 1.8))
    assert [each.name for each in deciding(changes)] == ["gain"]
    assert deciding(changes[:1]) == ()
    assert "friction forward +49 %" in smallest_text(changes, Units("V", "mm"))
