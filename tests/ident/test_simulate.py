"""The simulation against matrix exponentials, an adaptive integrator and closed-form step responses."""

from itertools import pairwise

import numpy as np
import pytest
import step_sums
from gainwright.ident.modes import modes_of
from gainwright.ident.plant import Plant
from gainwright.ident.run import Run
from gainwright.ident.simulate import free_run, grid_of, response
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import solve_ivp
from scipy.linalg import expm

LAG = ((2.0,), (0.37, 1.0))
TWO_LAGS = ((-1.5,), (0.4 * 0.09, 0.49, 1.0))
EQUAL_LAGS = ((0.8,), (0.25 * 0.25, 0.5, 1.0))
RESONANCE = ((1.2,), (1 / 81.0, 2 * 0.02 / 9.0, 1.0))
INTEGRATOR = ((-0.7,), (1.0, 0.0))
INTEGRATOR_WITH_LAG = ((3.0,), (0.2, 1.0, 0.0))
WITH_ZERO = ((0.3, 1.0), (0.05, 0.4, 1.0))
DIRECT = ((0.5, 1.0), (0.8, 1.0))
PLANTS = {
    "lag": LAG,
    "two lags": TWO_LAGS,
    "equal lags": EQUAL_LAGS,
    "resonance": RESONANCE,
    "integrator": INTEGRATOR,
    "integrator with lag": INTEGRATOR_WITH_LAG,
    "zero": WITH_ZERO,
    "direct term": DIRECT,
}


def state_space(numerator, denominator):
    """Companion form, written out: x' = A x + B u, y = C x + D u."""
    a = np.asarray(denominator, dtype=float) / denominator[0]
    b = np.concatenate([np.zeros(len(denominator) - len(numerator)), numerator]) / denominator[0]
    order = len(a) - 1
    matrix = np.zeros((order, order))
    matrix[0] = -a[1:]
    matrix[1:, :-1] += np.eye(order - 1)
    return matrix, np.eye(order)[:, 0], b[1:] - a[1:] * b[0], b[0]


def by_matrix_exponential(plant, time, command, before, dead_time, interpolated):
    """March over every instant at which a sample is taken or an input sample arrives, one matrix exponential each."""
    a, b, c, d = state_space(*plant)
    order = len(b)
    instants = np.unique(np.concatenate([time, (time + dead_time)[time + dead_time < time[-1]]]))
    moved = command - before

    def arriving(t):
        at = t - dead_time
        if interpolated:
            return np.interp(at, time, moved, left=0.0)
        index = np.searchsorted(time, at + 1e-9, side="right") - 1
        return moved[index] if index >= 0 else 0.0

    x, states = np.zeros(order), [np.zeros(order)]
    for left, right in pairwise(instants):
        h = right - left
        if interpolated:
            start, slope = arriving(left), (arriving(right) - arriving(left)) / h
        else:
            start, slope = arriving(0.5 * (left + right)), 0.0
        big = np.zeros((order + 2, order + 2))
        big[:order, :order], big[:order, order], big[order, order + 1] = a, b, 1.0
        x = (expm(big * h) @ np.concatenate([x, [start, slope]]))[:order]
        states.append(x)
    rows = np.array(states)[np.searchsorted(instants, time)]
    return rows @ c + d * np.array([arriving(t) for t in time])


def busy_command(rng, count):
    """Random levels, the first one held a while so that every way of running it agrees on the start."""
    return np.concatenate([np.full(3, 1.5), 1.5 + rng.standard_normal(count - 3)])


def stamps(rng, count, even):
    """50 ms stamps; uneven ones have two gaps and 20 % jitter."""
    time = 0.05 * np.arange(count)
    if even:
        return time
    time = time + 0.01 * rng.uniform(-1, 1, count)
    time[count // 2 :] += 0.33
    return time - time[0]


def ours(plant, time, command, before, dead_time, kind):
    """The code under test, zero-state response."""
    run = Run("log", time, command, np.zeros(len(time)), between=kind, command_before=before)
    return response(modes_of(*plant), grid_of(run), dead_time)


@pytest.mark.parametrize("even", [True, False], ids=["even", "uneven"])
@pytest.mark.parametrize("kind", ["held", "interpolated"])
@pytest.mark.parametrize("name", PLANTS)
def test_every_plant_follows_the_matrix_exponential_at_any_dead_time(name, kind, even):
    """No, a fractional, a whole and a long fractional dead time; held and straight command; even stamps and not."""
    rng = np.random.default_rng(11)
    time, command = stamps(rng, 90, even), busy_command(rng, 90)
    # equal poles are moved apart by 1e-4 of their size, which changes the plant by 1e-8; all else is rounding
    tolerance = 3e-7 if name == "equal lags" else 1e-9
    for dead_time in (0.0, 0.0173, 0.1, 0.6821):
        expected = by_matrix_exponential(PLANTS[name], time, command, 1.5, dead_time, kind == "interpolated")
        got = ours(PLANTS[name], time, command, 1.5, dead_time, kind)
        assert np.max(np.abs(got - expected)) < tolerance * np.ptp(expected)


@pytest.mark.parametrize("slip", [-0.05, 0.05])
def test_a_dead_time_slip_of_one_sample_would_be_seen(slip):
    """The comparison above can fail: one sample more or less of dead time misses by more than a per cent."""
    rng = np.random.default_rng(11)
    time, command = stamps(rng, 90, True), busy_command(rng, 90)
    expected = by_matrix_exponential(LAG, time, command, 1.5, 0.1 + slip, False)
    assert np.max(np.abs(ours(LAG, time, command, 1.5, 0.1, "held") - expected)) > 0.01 * np.ptp(expected)


@pytest.mark.parametrize("name", ["two lags", "resonance", "integrator with lag"])
def test_an_adaptive_integrator_agrees(name):
    """scipy's solve_ivp from jump to jump of the delayed command, relative tolerance 1e-10."""
    plant = PLANTS[name]
    a, b, c, _ = state_space(*plant)
    time = 0.04 * np.arange(120)
    command = step_sums.steps(time, [(0.4, 3.0), (1.6, -1.0), (3.0, 2.0)], 1.0)
    dead_time = 0.1234
    edges = [0.0, 0.4 + dead_time, 1.6 + dead_time, 3.0 + dead_time, time[-1]]
    x, out = np.zeros(len(b)), np.zeros(len(time))
    for left, right, u in zip(edges[:-1], edges[1:], [0.0, 2.0, -2.0, 1.0], strict=True):
        answer = solve_ivp(lambda _, s, u=u: a @ s + b * u, (left, right), x, rtol=1e-10, atol=1e-12, dense_output=True)
        inside = (time >= left) & (time <= right)
        out[inside] = (answer.sol(time[inside]).T @ c) if inside.any() else 0.0
        x = answer.y[:, -1]
    # the dense output of solve_ivp is of lower order than its steps: 1e-7 is what it keeps
    assert np.max(np.abs(ours(plant, time, command, 1.0, dead_time, "held") - out)) < 1e-6 * np.ptp(out)


@pytest.mark.parametrize(
    ("plant", "step"),
    [
        (LAG, step_sums.lag(0.37)),
        (TWO_LAGS, step_sums.two_lags(0.4, 0.09)),
        (RESONANCE, step_sums.resonance(9.0, 0.02)),
        (INTEGRATOR, step_sums.integrator()),
        (INTEGRATOR_WITH_LAG, step_sums.integrator_with_lag(0.2)),
    ],
    ids=["lag", "two lags", "resonance", "integrator", "integrator with lag"],
)
def test_steps_give_the_step_responses_of_the_textbook(plant, step):
    """Sums of delayed closed-form step responses, to rounding."""
    time = 0.03 * np.arange(200)
    command = step_sums.steps(time, [(0.6, 4.0), (3.0, 3.5)], 2.0)
    expected = step_sums.response(step, plant[0][0], 0.2047, time, command, 2.0)
    assert np.max(np.abs(ours(plant, time, command, 2.0, 0.2047, "held") - expected)) < 1e-11 * np.ptp(expected)


@given(
    frequency=st.floats(0.01, 60.0),
    damping=st.floats(0.002, 50.0),
    dead_time=st.floats(0.0, 3.0),
    seed=st.integers(0, 1000),
)
@settings(max_examples=25, deadline=None)
def test_any_second_order_plant_follows_the_matrix_exponential(frequency, damping, dead_time, seed):
    """From hardly damped through equal poles to far apart ones, faster and slower than the sampling.

    Near equal poles the partial fractions lose up to four digits by cancellation and the separation adds 1e-8.
    """
    rng = np.random.default_rng(seed)
    time, command = stamps(rng, 50, True), busy_command(rng, 50)
    plant = ((1.0,), (1 / frequency**2, 2 * damping / frequency, 1.0))
    expected = by_matrix_exponential(plant, time, command, 1.5, dead_time, False)
    got = ours(plant, time, command, 1.5, dead_time, "held")
    assert np.max(np.abs(got - expected)) <= 1e-6 * max(np.max(np.abs(expected)), 1e-6)


def test_a_plant_that_settles_starts_where_the_command_before_the_record_holds_it():
    """Level 20 at command 3; before the record the command was 5, so a gain of -2 holds 16."""
    time = np.arange(6.0)
    run = Run("log", time, np.full(6, 4.0), np.zeros(6), command_before=5.0)
    got = free_run(Plant((-2.0,), (1.0, 1.0), 0.5), run, 3.0, 20.0)
    expected = 16.0 + 2.0 * np.where(time > 0.5, 1 - np.exp(-(time - 0.5)), 0.0)
    assert got == pytest.approx(expected, abs=1e-12)


def test_without_a_command_before_the_record_the_first_command_is_the_steady_one():
    """Nothing moves: the response stays at the level of the first command."""
    run = Run("log", np.arange(5.0), np.full(5, 4.0), np.zeros(5))
    assert free_run(Plant((2.0,), (3.0, 1.0)), run, 1.0, 10.0) == pytest.approx(16.0)


def test_an_integrating_plant_moves_with_the_command_less_the_operating_command():
    """Rate gain * (command - operating command): 3 * (2 - 2.5) per second, and 3 * (4 - 2.5) after the step."""
    time = np.arange(8.0)
    run = Run("log", time, np.where(time >= 4, 4.0, 2.0), np.zeros(8))
    got = free_run(Plant((3.0,), (1.0, 0.0), 1.0), run, 2.5, 7.0)
    expected = 7.0 - 1.5 * time + np.where(time > 5, 6.0 * (time - 5), 0.0)
    assert got == pytest.approx(expected, abs=1e-12)


def test_an_integrator_with_lag_starts_in_its_steady_drift():
    """The lag has long settled on the command before the record, so the drift is straight from the first sample."""
    time = 0.1 * np.arange(30)
    run = Run("log", time, np.full(30, 2.0), np.zeros(30))
    got = free_run(Plant((3.0,), (0.5, 1.0, 0.0), 0.2), run, 1.0, 0.0)
    assert got == pytest.approx(3.0 * time, abs=1e-12)


def test_slightly_uneven_stamps_and_truly_even_ones_meet():
    """Jitter just beyond what passes for even goes the other way and gives nearly the same response."""
    rng = np.random.default_rng(5)
    time, command = stamps(rng, 200, True), busy_command(rng, 200)
    jittered = time.copy()
    jittered[1:-1] += 0.05 * 3e-3 * rng.uniform(-1, 1, 198)
    assert grid_of(Run("log", jittered, command, command)).interval is None
    a, b = (ours(LAG, t, command, 1.5, 0.083, "held") for t in (time, jittered))
    # arrival and reading each slip by 0.3 % of a sample, where a lag moves by at most gain * command / time constant
    assert 0 < np.max(np.abs(a - b)) < 2 * 3e-3 * 0.05 * 2.0 * np.ptp(command) / 0.37


def test_a_very_fast_and_a_very_slow_lag_stay_finite():
    """A lag of a thousandth of a sample follows at once; one of a million records is an integrator over it."""
    time = np.arange(50.0)
    command = np.where(time >= 5, 1.0, 0.0)
    fast = ours(((1.0,), (1e-3, 1.0)), time, command, 0.0, 0.0, "held")
    assert fast == pytest.approx(np.where(time >= 6, 1.0, 0.0), abs=1e-12)
    slow = ours(((5e7,), (5e7, 1.0)), time, command, 0.0, 0.0, "held")
    assert slow == pytest.approx(np.maximum(time - 5, 0.0), rel=1e-6)


def test_three_integrators_and_more_zeros_than_poles_are_refused():
    """Neither has a place in the catalogue, and the partial fractions would be wrong."""
    with pytest.raises(ValueError, match="more than two integrators"):
        modes_of((1.0,), (1.0, 0.0, 0.0, 0.0))
    with pytest.raises(ValueError, match="more zeros than poles"):
        modes_of((1.0, 0.0, 0.0), (1.0, 1.0))
