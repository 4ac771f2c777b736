"""Step measures on the second-order response written out in closed form."""

import numpy as np
import pytest
from gainwright.design.discretise import columns_of, law_columns
from gainwright.design.gains import Gains
from gainwright.design.sampled.around import run_around
from gainwright.design.sampled.bank import build_bank
from gainwright.design.sampled.loop import Clamps
from gainwright.design.step_metrics import first_highest, last_entry, overshoot, rise_time, settling_time, still_moving
from gainwright.ident.plant import Plant

ZETA = np.array([0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.7, 0.8, 0.9])
ONE = np.ones(1)


def second_order(zeta, spacing=0.002, length=60.0):
    """1 - exp(-z t) (cos wd t + z/sqrt(1-z^2) sin wd t) at natural frequency 1 rad/s, a column a damping ratio."""
    t = spacing * np.arange(1, int(length / spacing) + 1)[:, None]
    wd = np.sqrt(1 - zeta**2)
    return 1 - np.exp(-zeta * t) * (np.cos(wd * t) + zeta / wd * np.sin(wd * t)), spacing


def test_overshoot_is_that_of_the_exact_law():
    """SO-01: 100 exp(-pi z/sqrt(1-z^2)): 72.9 52.7 37.2 25.4 16.3 9.48 4.60 1.52 0.15 % (exact law; Nise, Dorf)."""
    response, _ = second_order(ZETA)
    printed = np.array([72.9, 52.7, 37.2, 25.4, 16.3, 9.48, 4.60, 1.52, 0.15])
    half_digit = np.array([0.05] * 5 + [0.005] * 4)
    found = 100 * overshoot(response, np.ones(9))
    assert np.all(np.abs(found - printed) <= half_digit)


def test_the_peak_between_coarse_points_is_found_by_a_parabola():
    """Eight points in a half wave miss the peak by up to 2 %; the parabola leaves less than 0.05 % of the step."""
    response, _ = second_order(ZETA[:5], spacing=0.37)
    exact = np.exp(-np.pi * ZETA[:5] / np.sqrt(1 - ZETA[:5] ** 2))
    assert overshoot(response, np.ones(5)) == pytest.approx(exact, abs=3e-3)
    assert np.abs(response.max(axis=0) - 1 - exact).max() > 4e-3


def test_rise_time_is_the_published_table():
    """SO-04: wn Tr 10-90 %: 1.104 1.203 1.321 1.463 1.638 1.854 2.126 2.467 2.883 (Nise, Fig. 4.16; from memory)."""
    response, spacing = second_order(ZETA)
    printed = np.array([1.104, 1.203, 1.321, 1.463, 1.638, 1.854, 2.126, 2.467, 2.883])
    # z = 0.4 is 1.4635 exactly and is printed 1.463: half a digit and the last bit
    assert rise_time(response, np.ones(9), spacing) == pytest.approx(printed, abs=5.5e-4)


@pytest.mark.parametrize(
    ("band", "expected"),
    [(0.02, [11.23, 8.076, 5.979, 3.756, 4.700]), (0.05, [10.14, 5.289, 2.900, 3.385, 4.014])],
)
def test_settling_time_is_measured_not_taken_from_a_rule(band, expected):
    """SO-11: exact wn Ts at z = 0.3 0.5 0.7 0.8 0.9; the rules 4/(z wn), 3/(z wn) are up to 48 % off (Ogata 5-3)."""
    zeta = np.array([0.3, 0.5, 0.7, 0.8, 0.9])
    response, spacing = second_order(zeta)
    half_digit = np.where(np.array(expected) >= 10, 5e-3, 5e-4) + 1e-5
    found = settling_time(response, np.ones(5), band, spacing)
    assert np.all(np.abs(found - expected) <= half_digit)


def test_least_settling_is_where_the_overshoot_equals_the_band():
    """SO-11: minima at z = 0.7797, wn Ts 3.603 (2 %) and z = 0.6901, 2.859 (5 %)."""
    zeta = np.array([0.77975, 0.69015])
    response, spacing = second_order(zeta)
    two = settling_time(response, np.ones(2), 0.02, spacing)[0]
    five = settling_time(response, np.ones(2), 0.05, spacing)[1]
    assert (two, five) == pytest.approx((3.603, 2.859), abs=2e-3)


def test_a_falling_step_is_measured_like_a_rising_one():
    """The sign of the step leaves every measure alone."""
    response, spacing = second_order(ZETA)
    up, down = np.ones(9), -3.0 * np.ones(9)
    assert overshoot(-3.0 * response, down) == pytest.approx(overshoot(response, up))
    assert rise_time(-3.0 * response, down, spacing) == pytest.approx(rise_time(response, up, spacing))


def test_what_is_never_reached_is_infinite():
    """A response that stops at 80 % neither rises nor settles; one outside at the end has not settled."""
    response = np.minimum(np.arange(1, 101) / 50, 0.8)[:, None]
    assert np.isinf(rise_time(response, ONE, 0.1)[0])
    assert np.isinf(settling_time(response, ONE, 0.02, 0.1)[0])
    assert last_entry(np.zeros((5, 1)), 0.1, 1.0)[0] == 0.0


def test_a_clamp_that_never_lets_go_is_noticed():
    """All of the last tenth limited: still moving."""
    limited = np.zeros((50, 2), dtype=bool)
    limited[40:, 1] = True
    assert still_moving(limited, 2).tolist() == [False, True]


def test_a_peak_in_a_corner_is_where_both_sides_meet():
    """exp(2t) - 1 up to t = c, then exp(2c) - 1 - 3 (t - c): the peak is exp(2c) - 1 wherever c falls between rows of
    0.02 s; a parabola through the corner is off by up to 1 %."""
    corners = np.linspace(0.5, 0.54, 17)
    time = 0.02 * np.arange(1, 60)[:, None]
    top = np.expm1(2.0 * corners)
    response = np.where(time < corners, np.expm1(2.0 * time), top - 3.0 * (time - corners))
    found = overshoot(response, np.ones(17))
    assert found == pytest.approx(top - 1.0, abs=1.8e-4)  # third difference of exp(2t) over 0.02 s: 0.04^3 e


def test_overshoot_of_a_relative_degree_one_loop_does_not_hang_on_where_it_is_looked_at():
    """An unstable lag with a tenth of a sample of dead time peaks in a corner: 0.85808 by sub-steps that fall on it."""
    plant = Plant((2.4409294030109763,), (1.0, -1.0), 0.1 * 0.10443831655310702)
    gains = Gains("PI", 6.64939725386149, 6.64939725386149 * 0.76407296908141)
    for points in (8, 20, 64):
        bank = build_bank([plant], 0.10443831655310702, points=points)
        law = law_columns(columns_of([gains]), bank.interval)
        history = run_around(bank, np.zeros(1, int), law, setpoint=np.ones(1), disturbance=np.zeros(1),
                             clamps=Clamps(np.full(1, -np.inf), np.full(1, np.inf), np.inf), samples=60)  # fmt: skip
        assert overshoot(history.response, np.ones(1))[0] == pytest.approx(0.85808028, abs=2e-5)


@pytest.mark.parametrize("rows", [1, 127, 128, 130, 1000, 1024])
@pytest.mark.parametrize("kind", ["numbers", "ties", "bools", "holes"])
def test_the_first_highest_row_is_that_of_numpy(rows, kind):
    """numpy.argmax along the rows, the independent computation: ties go to the first, NaN counts as highest."""
    rng = np.random.default_rng(rows)
    table = rng.normal(size=(rows, 37))
    if kind == "ties":
        table = np.round(2.0 * table)
    elif kind == "bools":
        table = table > 2.5
    elif kind == "holes":
        table[rng.random(table.shape) < 0.01] = np.nan
    assert np.array_equal(first_highest(table), table.argmax(axis=0))
