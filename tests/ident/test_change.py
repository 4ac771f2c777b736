"""What changed, against hand-worked Wald statistics and redrawn plants."""

import numpy as np
import pytest
from gainwright.ident.change import changes, known_of
from gainwright.ident.identify import identify
from gainwright.ident.known import Known, plant_of_parameters, plausible_of
from gainwright.ident.plant import Plant
from gainwright.ident.run import Run
from scipy.signal import lfilter

SETTLES = Plant((1.0,), (1.0, 1.0, 1.0))
NAMES = ("gain", "dead time", "time constant")


def known(values, errors, freedom=1e6):
    """A lag with independent parameters."""
    gain, dead, tau = values
    plant = Plant((gain,), (tau, 1.0), dead)
    return Known("lag", plant, NAMES, ("mm/V", "s", "s"), np.array(values), np.diag(np.square(errors)), freedom)


def test_the_joint_test_is_walds_by_hand():
    """Gain off by 0.3 with 0.1 and 0.1, dead time by 0.02 with 0.01 each, the rest equal: 0.3^2/0.02 + 0.02^2/0.0002 =
    6.5; for very many samples the chance is that of chi-squared 6.5 at 3 degrees of freedom: 0.0897 (tables).
    """
    found = changes(known([2.0, 0.1, 0.5], [0.1, 0.01, 0.02]), known([2.3, 0.12, 0.5], [0.1, 0.01, 0.02]))
    assert found.p_value == pytest.approx(0.0897, abs=2e-4)
    assert not found.changed
    assert not any(row.changed for row in found.parameters)


def test_a_change_is_shown_with_its_interval():
    """Gain 2 to 3 with 0.1 each: 1 +- 1.96 * 0.1414; time constant by its logarithm: 0.5 (exp(ln 1.2 +- 1.96 e) - 1),
    e = sqrt(0.04^2 + (0.02/0.6)^2).
    """
    found = changes(known([2.0, 0.1, 0.5], [0.1, 0.01, 0.02]), known([3.0, 0.1, 0.6], [0.1, 0.01, 0.02]))
    rows = {row.name: row for row in found.parameters}
    assert found.changed
    assert (rows["gain"].changed, rows["dead time"].changed, rows["time constant"].changed) == (True, False, True)
    assert (rows["gain"].low, rows["gain"].high) == pytest.approx((1 - 0.27718, 1 + 0.27718), abs=1e-4)
    error = np.hypot(0.04, 0.02 / 0.6)
    assert rows["time constant"].low == pytest.approx(
        0.5 * np.expm1(np.log(1.2) - 1.959964 * error), rel=1e-6
    )  # seven digits of 1.959964
    assert rows["time constant"].difference == pytest.approx(0.1)


def test_few_independent_samples_make_the_test_careful():
    """The same difference with four degrees of freedom instead of a million is no longer sure."""
    sure = changes(known([2.0, 0.1, 0.5], [0.1, 0.01, 0.02]), known([2.5, 0.1, 0.5], [0.1, 0.01, 0.02]))
    careful = changes(known([2.0, 0.1, 0.5], [0.1, 0.01, 0.02], 4.0), known([2.5, 0.1, 0.5], [0.1, 0.01, 0.02]))
    assert sure.p_value < 0.01 < 0.05 < careful.p_value


def test_a_gain_of_the_other_sign_is_a_change():
    """2 to -2: nothing in a size alone would tell."""
    found = changes(known([2.0, 0.1, 0.5], [0.1, 0.01, 0.02]), known([-2.0, 0.1, 0.5], [0.1, 0.01, 0.02]))
    assert found.changed
    assert found.parameters[0].difference == -4.0


def test_other_structures_are_not_compared_number_by_number():
    """Different names: changed, without a chance."""
    other = Known("x", Plant((1.0,), (1.0, 0.0)), ("gain", "dead time"), ("", ""), np.ones(2), np.eye(2))
    found = changes(known([2.0, 0.1, 0.5], [0.1, 0.01, 0.02]), other)
    assert (found.parameters, found.p_value, found.changed) == ((), None, True)


@pytest.mark.parametrize(
    ("names", "values", "like", "at"),
    [
        (("gain", "dead time", "natural frequency", "damping ratio"), [2.0, 0.1, 4.0, 0.3], SETTLES,
         lambda s: 2.0 * 16.0 / (s * s + 2.4 * s + 16.0) * np.exp(-0.1 * s)),
        (("gain", "dead time", "time constant 1", "time constant 2"), [2.0, 0.0, 0.5, 0.2], SETTLES,
         lambda s: 2.0 / ((0.5 * s + 1.0) * (0.2 * s + 1.0))),
        (("gain", "dead time", "time constant", "friction forward", "friction backward"), [45.0, 0.0, 0.1, 0.02, 0.03],
         Plant((1.0,), (0.1, 1.0, 0.0)), lambda s: 45.0 / (s * (0.1 * s + 1.0))),
        (("gain", "dead time", "time constant", "zero time"), [2.0, 0.0, 0.5, 0.3], Plant((1.0,), (1.0, 1.0)),
         lambda s: 2.0 * (0.3 * s + 1.0) / (0.5 * s + 1.0)),
    ],
)  # fmt: skip
def test_named_parameters_make_the_plant_of_their_formula(names, values, like, at):
    """Each structure at one point of the s plane, its formula written out."""
    s = complex(-0.4, 1.7)
    assert plant_of_parameters(names, np.array(values), like).at(s) == pytest.approx(at(s), rel=1e-12)


def test_plants_drawn_from_a_sheet_spread_as_its_covariance_says():
    """Mean and standard deviation of gain and time constant over 4,000 draws; commands spread by themselves."""
    drawn = plausible_of(known([2.0, 0.1, 0.5], [0.1, 0.01, 0.02]), 4000, np.array([3.0, 0.2]))
    gains = np.array([plant.numerator[0] for plant in drawn.plants])
    times = np.array([plant.denominator[0] for plant in drawn.plants])
    assert (gains.mean(), gains.std()) == pytest.approx((2.0, 0.1), rel=0.06)
    assert (times.mean(), times.std()) == pytest.approx((0.5, 0.02), rel=0.06)
    assert (drawn.operating_command.mean(), drawn.operating_command.std()) == pytest.approx((3.0, 0.2), rel=0.06)
    assert min(plant.dead_time for plant in drawn.plants) > 0.0


def lag_record(seed, tau):
    """Steps through 2 exp(-0.1 s)/(tau s + 1), closed form, under noise e[k] = 0.8 e[k-1] + w[k]."""
    rng = np.random.default_rng(seed)
    time = np.arange(0.0, 20.0, 0.05)
    command, response = np.zeros(time.size), np.zeros(time.size)
    for at, size in ((1.0, 1.0), (7.0, -2.0), (13.0, 1.5)):
        command += size * (time >= at - 1e-9)
        response += 2.0 * size * -np.expm1(-np.clip(time - at - 0.1, 0.0, None) / tau)
    return Run("made", time, command, response + lfilter([1.0], [1.0, -0.8], rng.normal(0.0, 0.02, time.size)))


def test_a_longer_time_constant_is_found_in_two_records_and_nothing_else_is():
    """0.5 s against 0.65 s under coloured noise: the time constant's interval holds 0.15 s, gain and dead time stay."""
    before, after = (known_of(identify([lag_record(seed, tau)])) for seed, tau in ((1, 0.5), (2, 0.65)))
    found = {row.name: row for row in changes(before, after).parameters}
    assert found["time constant"].changed
    assert found["time constant"].low < 0.15 < found["time constant"].high
    assert not found["gain"].changed
