"""The batched loop against a simulation that shares nothing with it: Runge-Kutta and the contract's formula by hand."""

import numpy as np
import pytest
from gainwright.design.discretise import columns_of, law_columns, law_from_gains
from gainwright.design.gains import Gains
from gainwright.design.sampled.bank import build_bank
from gainwright.design.sampled.loop import Clamps, simulate
from gainwright.ident.law import Clamp
from gainwright.ident.plant import Plant

PLANTS = [
    Plant((2.0,), (0.5, 1.0), 0.113),
    Plant((1.5,), (0.04, 0.4, 1.0), 0.0),  # double pole
    Plant((1.5,), (0.04, 0.4, 1.0), 0.02),  # a whole number of samples
    Plant((-1.2,), (0.01, 0.02, 1.0), 0.037),  # resonance, negative gain
    Plant((3.0,), (0.2, 1.0, 0.0), 0.0501),  # servo
    Plant((0.4,), (1.0, 0.0), 0.004),
    Plant((0.3, 1.0), (0.1, 0.9, 1.5, 1.0), 0.061),  # with a zero
    Plant((0.2,), (1e-6, 0.002, 0.4, 1.0), 0.03),  # poles three decades apart
]
INTERVAL, DELAY = 0.02, 0.003
EVERY = np.arange(len(PLANTS))


def both(small_steps, gains, *, samples=150, low=-np.inf, high=np.inf, disturbance=0.0, pieces=4, plants=PLANTS):
    """Responses at the samples: ours and the independent ones."""
    bank = build_bank(plants, INTERVAL, computation_delay=DELAY)
    count = len(plants)
    law = law_columns(columns_of([gains] * count), INTERVAL)
    ours = simulate(
        bank,
        np.arange(count),
        law,
        setpoint=np.ones(count),
        disturbance=np.full(count, disturbance),
        clamps=Clamps(np.full(count, low), np.full(count, high)),
        samples=samples,
    )
    shipped = law_from_gains(gains, INTERVAL, Clamp(low, high))
    times, theirs, sent = small_steps(
        plants,
        shipped,
        setpoint=1.0,
        samples=samples,
        computation_delay=DELAY,
        disturbance=disturbance,
        low=low,
        high=high,
        pieces=pieces,
    )
    return ours, times, theirs, sent


@pytest.mark.parametrize(
    "gains",
    [
        Gains("P", 0.3),
        Gains("I", integral=0.2),
        Gains("PI", 0.2, 0.3, setpoint_weight=0.4),
        Gains("PD", 0.3, derivative=0.01, filter_time=0.01),
        Gains("PID", 0.3, 0.4, 0.02, 0.01),
        Gains("lead", 0.2, zero=3.0, pole=12.0),
    ],
)
def test_every_structure_follows_the_independent_simulation(run_small_steps, gains):
    """At every sample within the Runge-Kutta error, fractional dead times and mixed orders side by side.

    The plant with poles at 2000 1/s is left out of small_steps: it is stiff there; a test of its own looks at it.
    """
    ours, _, theirs, sent = both(run_small_steps, gains, plants=PLANTS[:7])
    at_samples = theirs[7::8]
    scale = np.abs(theirs).max(axis=0)
    assert np.all(np.abs(ours.response[3::4] - at_samples) <= 2e-6 * scale)
    assert np.all(np.abs(ours.command - sent) <= 1e-5 * np.abs(sent).max(axis=0))


def test_no_slip_in_the_arrival_of_the_command_hides_behind_first_order_convergence(run_small_steps):
    """Halving the independent steps must cut the difference about sixteen-fold: fourth order, no first-order rest."""
    gains = Gains("PID", 0.3, 0.4, 0.02, 0.01)
    differences = []
    for pieces in (1, 2):
        ours, _, theirs, _ = both(run_small_steps, gains, pieces=pieces, plants=PLANTS[:4])
        differences.append(np.abs(ours.response[3::4] - theirs[2 * pieces - 1 :: 2 * pieces]).max(axis=0))
    assert np.all(differences[0] / differences[1] > 10.0)


def test_stiff_poles_keep_their_static_gain():
    """Poles three decades apart, one scaled form: the response at rest is exactly g P/(1 + g P)."""
    bank = build_bank(PLANTS[7:], INTERVAL)
    law = law_columns(columns_of([Gains("P", 2.0)]), INTERVAL)
    free = Clamps(np.array([-np.inf]), np.array([np.inf]))
    ours = simulate(bank, EVERY[:1], law, setpoint=np.ones(1), disturbance=np.zeros(1), clamps=free, samples=500)
    assert ours.response[-1, 0] == pytest.approx(0.4 / 1.4, rel=1e-9)


def test_points_between_the_samples_are_exact_too(run_small_steps):
    """Interpolating nothing: each quarter point equals the independent response at that very time."""
    plant = [Plant((1.0,), (0.01, 0.02, 1.0), 0.0)]
    bank = build_bank(plant, INTERVAL, computation_delay=0.0)
    law = law_columns(columns_of([Gains("I", integral=0.1)]), INTERVAL)
    free = Clamps(np.array([-np.inf]), np.array([np.inf]))
    ours = simulate(bank, EVERY[:1], law, setpoint=np.ones(1), disturbance=np.zeros(1), clamps=free, samples=100)
    _, theirs, _ = run_small_steps(plant, law_from_gains(Gains("I", integral=0.1), INTERVAL), setpoint=1.0, samples=100)
    # without a dead time the first of the two parts of each sample is empty; the second has four quarter points
    quarters = theirs.reshape(100, 8)[:, 4:].ravel()
    assert ours.response[:, 0] == pytest.approx(quarters, abs=1e-7)


def test_a_clamped_command_follows_the_contract_formula(run_small_steps):
    """With the clamp in action the memory terms count: command and response equal the formula written out."""
    plants = [PLANTS[0], PLANTS[1], PLANTS[6]]
    ours, _, theirs, sent = both(run_small_steps, Gains("PI", 1.2, 2.5), low=-0.2, high=0.62, plants=plants)
    assert ours.limited is not None
    assert ours.limited.any(axis=0).all()
    assert sent.max() == 0.62
    assert ours.command == pytest.approx(sent, abs=1e-5)
    assert ours.response[3::4] == pytest.approx(theirs[7::8], abs=1e-5)


def test_tracking_keeps_a_clamped_integral_from_winding_up():
    """The same PI without memory of the clamp overshoots far more: its integral fills while the command is limited."""
    plant = Plant((1.0,), (2.0, 1.0), 0.1)
    bank = build_bank([plant], 0.05)
    law = law_columns(columns_of([Gains("PI", 6.0, 6.0)]), 0.05)
    blind = type(law)(law.command, law.setpoint, law.response, law.command)
    peaks = []
    for one in (law, blind):
        bound = Clamps(np.array([-1.3]), np.array([1.3]))
        run = simulate(bank, EVERY[:1], one, setpoint=np.ones(1), disturbance=np.zeros(1), clamps=bound, samples=400)
        peaks.append(run.response.max())
        assert run.response[-1, 0] == pytest.approx(1.0, abs=1e-3)
    assert peaks[0] < 1.05
    assert peaks[1] > 1.15


def test_a_rate_limit_bounds_each_change_of_the_command():
    """From one sample to the next, from the first on."""
    law = law_columns(columns_of([Gains("PI", 1.0, 2.0)]), INTERVAL)
    bound = Clamps(np.array([-np.inf]), np.array([np.inf]), change=0.05)
    bank = build_bank(PLANTS[:1], INTERVAL)
    run = simulate(bank, EVERY[:1], law, setpoint=np.ones(1), disturbance=np.zeros(1), clamps=bound, samples=300)
    steps = np.diff(run.command[:, 0], prepend=0.0)
    assert np.abs(steps).max() == pytest.approx(0.05, abs=1e-12)
    assert run.limited is not None
    assert run.limited[0, 0]


def test_a_command_disturbance_enters_before_the_dead_time(run_small_steps):
    """A constant push of the plant: the independent run adds it to the sent command."""
    ours, _, theirs, _ = both(run_small_steps, Gains("PI", 0.2, 0.3), disturbance=0.7, plants=PLANTS[:3])
    assert ours.response[3::4] == pytest.approx(theirs[7::8], abs=1e-6)


def test_the_controller_sees_the_response_through_its_filter_and_the_response_is_reported_without():
    """A lag plant behind a filter equals a loop around plant and filter, read before the filter."""
    plant, filter_time = Plant((2.0,), (0.5, 1.0), 0.03), 0.08
    bank = build_bank([plant], INTERVAL, filter_time=filter_time)
    chain = Plant((2.0,), (0.5 * filter_time, 0.5 + filter_time, 1.0), 0.03)
    law = law_columns(columns_of([Gains("PI", 0.3, 0.8)]), INTERVAL)
    free = Clamps(np.array([-np.inf]), np.array([np.inf]))

    def run(one):
        return simulate(one, EVERY[:1], law, setpoint=np.ones(1), disturbance=np.zeros(1), clamps=free, samples=200)

    filtered, seen = run(bank), run(build_bank([chain], INTERVAL))
    assert filtered.command == pytest.approx(seen.command, abs=1e-9)
    assert filtered.response.max() > seen.response.max()


def test_the_slope_of_a_lag_is_steepest_just_after_the_command_arrives():
    """A held step u into g/(tau s + 1): the largest slope is g u/tau exactly, wherever the arrival falls."""
    bank = build_bank([Plant((2.0,), (0.5, 1.0), 0.0137)], INTERVAL)
    law = law_columns(columns_of([Gains("P", 1e-9, setpoint_weight=1e9)]), INTERVAL)
    free = Clamps(np.array([-np.inf]), np.array([np.inf]))
    step = simulate(
        bank, EVERY[:1], law, setpoint=np.ones(1), disturbance=np.zeros(1), clamps=free, samples=50, rates=True
    )
    assert step.rate == pytest.approx([2.0 * 1.0 / 0.5], rel=1e-6)
