"""Stability, margins, noise and poles of the sampled loop against closed forms and eigenvalues."""

import numpy as np
import pytest
from gainwright.design.discretise import columns_of, law_columns
from gainwright.design.gains import Gains
from gainwright.design.sampled.bank import build_bank
from gainwright.design.sampled.frequency import command_noise, margins_of, noise_density, spectra_of
from gainwright.design.sampled.poles import poles_of, starting_poles
from gainwright.design.values import following_time
from gainwright.ident.fitted import Noise
from gainwright.ident.plant import Plant

ONE = np.zeros(1, dtype=int)
T = 0.02
PLANTS = [
    Plant((2.0,), (0.5, 1.0), 0.113),
    Plant((1.5,), (0.01, 0.004, 1.0), 0.02),
    Plant((-3.0,), (0.2, 1.0, 0.0), 0.0501),
    Plant((1.0,), (1.0, -1.0), 0.01),  # open-loop unstable
]


def test_nyquist_count_and_eigenvalues_agree_on_every_loop():
    """Gains over five decades, all structures, an unstable plant among them: the count is never off."""
    bank = build_bank(PLANTS, T, computation_delay=0.001)
    spectra, which, seen = spectra_of(bank), np.arange(len(PLANTS)), set()
    for gain in np.geomspace(0.01, 100.0, 15):
        for gains in (
            Gains("P", gain),
            Gains("I", integral=gain),
            Gains("PI", gain, 2 * gain),
            Gains("PID", gain, 2 * gain, 0.1 * gain, 0.01),
            Gains("PD", -gain, 0.0, -0.1 * gain, 0.01),
        ):
            law = law_columns(columns_of([gains] * len(PLANTS)), T)
            largest = np.exp(starting_poles(bank, which, law) * T)
            radius = np.abs(largest).max(axis=0)
            stable = margins_of(spectra, which, law).stable
            clear = np.abs(radius - 1) > 1e-6
            assert np.array_equal(stable[clear], radius[clear] < 1)
            seen |= set(zip(which.tolist(), stable.tolist(), strict=True))
    assert len(seen) == 2 * len(PLANTS)  # each plant was met stable and unstable


@pytest.mark.parametrize("share", [0.1, 0.4, 0.7])
def test_margins_of_the_delayed_integrator_are_those_of_its_formula(share):
    """L = x/(z (z - 1)), x = K T: gain margin 1/x; at |L| = 1, 2 sin(a/2) = x and the phase margin is 90 - 1.5 a.

    Sensitivity peak from the formula on a fine grid of its own.
    """
    law = law_columns(columns_of([Gains("P", share / T)]), T)
    margins = margins_of(spectra_of(build_bank([Plant((1.0,), (1.0, 0.0), T)], T)), ONE, law)
    angle = 2 * np.arcsin(share / 2)
    assert margins.gain[0] == pytest.approx(-20 * np.log10(share), abs=1e-9)
    assert margins.phase[0] == pytest.approx(90 - 1.5 * np.degrees(angle), abs=1e-8)
    z = np.exp(1j * np.linspace(1e-3, np.pi, 2_000_001))
    assert margins.sensitivity[0] == pytest.approx(np.max(1 / np.abs(1 + share / (z * (z - 1)))), rel=1e-5)


def test_a_lightly_damped_resonance_is_not_stepped_over():
    """Damping 0.002 and an integral law: the critical gain is 2 zeta w/g where the hold and delay are small.

    Characteristic s^3/w^2 + 2 zeta s^2/w + s + g I: Routh gives g I = 2 zeta w; hold and dead time shift it by their
    phase at the resonance, which the exact factor must show: eigenvalues at 0.1 % either side differ in stability.
    """
    zeta, w = 0.002, 10.0
    bank = build_bank([Plant((1.0,), (1 / w**2, 2 * zeta / w, 1.0))], 0.001)
    law = law_columns(columns_of([Gains("I", integral=1e-3)]), 0.001)
    critical = 1e-3 * margins_of(spectra_of(bank), ONE, law).upper[0]
    assert critical == pytest.approx(2 * zeta * w, rel=0.02)
    for factor, stable in ((0.999, True), (1.001, False)):
        near = law_columns(columns_of([Gains("I", integral=factor * critical)]), 0.001)
        assert bool(np.abs(np.exp(starting_poles(bank, ONE, near) * 0.001)).max() < 1) is stable


def test_a_loop_that_needs_its_gain_reports_how_far_it_may_fall():
    """1/(s - 1) under P is stable only above P = 1: the reduction counts as gain margin too."""
    spectra = spectra_of(build_bank([Plant((1.0,), (1.0, -1.0))], 0.01))
    margins = margins_of(spectra, ONE, law_columns(columns_of([Gains("P", 1.5)]), 0.01))
    assert margins.stable[0]
    assert margins.lower[0] == pytest.approx(1 / 1.5, rel=1e-4)
    assert margins.gain[0] == pytest.approx(20 * np.log10(1.5), abs=1e-3)


def test_white_noise_reaches_the_command_as_the_recursion_says():
    """y' = (1 - x) y - x n, u = -P (y + n), x = P T: the variance of u is P^2 sigma^2 2/(2 - x)."""
    gain, sigma = 15.0, 0.3
    spectra = spectra_of(build_bank([Plant((1.0,), (1.0, 0.0))], T))
    law = law_columns(columns_of([Gains("P", gain)]), T)
    found = command_noise(spectra, ONE, law, Noise(T, sigma, sigma), 0.0)
    # the trapezoid over the grid is good to a few parts in a thousand
    assert found[0] == pytest.approx(gain * sigma * np.sqrt(2 / (2 - gain * T)), rel=5e-3)


@pytest.mark.parametrize(("rho", "c"), [(0.9, 0.0), (0.8, -0.4), (0.95, -0.8), (0.7, 0.3), (-0.4, 0.2), (0.0, 0.5)])
def test_noise_density_gives_back_the_variances_of_the_process(rho, c):
    """The mean is the variance, the cosine's the lag-one covariance (1 + rho c)(rho + c)/(1 + 2 rho c + c^2)."""
    angle = np.linspace(0, np.pi, 200_001)
    density = noise_density(Noise(0.01, 0.5, 0.1, rho, c), 0.01, angle)
    lag_one = 0.25 * (1 + rho * c) * (rho + c) / (1 + 2 * rho * c + c * c)
    assert np.trapezoid(density, angle) / np.pi == pytest.approx(0.25, rel=1e-6)
    assert np.trapezoid(density * np.cos(angle), angle) / np.pi == pytest.approx(lag_one, rel=1e-6)


def test_noise_seen_at_every_second_sample_keeps_its_covariance():
    """rho 0.7, c 0.3: k samples apart (1 + rho c)(rho + c)/(1 + 2 rho c + c^2) rho^(k - 1), taken at k = 2 and 4."""
    rho, c, angle = 0.7, 0.3, np.linspace(0, np.pi, 200_001)
    density = noise_density(Noise(0.01, 1.0, 0.4, rho, c), 0.02, angle)
    lag_one = (1 + rho * c) * (rho + c) / (1 + 2 * rho * c + c * c)
    for apart in (1, 2):
        wanted = lag_one * rho ** (2 * apart - 1)
        assert np.trapezoid(density * np.cos(apart * angle), angle) / np.pi == pytest.approx(wanted, rel=1e-6)
    assert np.trapezoid(density, angle) / np.pi == pytest.approx(1.0, rel=1e-6)


def test_slow_noise_keeps_its_correlation_time_at_another_interval():
    """rho = 0.9 at 10 ms is 0.81 at 20 ms."""
    angle = np.linspace(0, np.pi, 200_001)
    density = noise_density(Noise(0.01, 1.0, 0.4, 0.9), 0.02, angle)
    assert np.trapezoid(density * np.cos(angle), angle) / np.pi == pytest.approx(0.81, rel=1e-6)


def test_the_lag_behind_a_ramp_is_one_over_the_velocity_constant():
    """PI and a static plant: 1/(I g) s; P and an integrating one: 1/(P g); P and a static one never keep up."""
    plants = [Plant((2.0,), (0.5, 1.0), 0.1), Plant((3.0,), (0.2, 1.0, 0.0), 0.05)]
    spectra = spectra_of(build_bank(plants, T))

    def lag(gains, plant):
        return following_time(spectra, np.array([plant]), law_columns(columns_of([gains]), T))[0]

    assert lag(Gains("PI", 0.5, 1.5), 0) == pytest.approx(1 / 3, rel=1e-4)
    assert lag(Gains("P", 0.8), 1) == pytest.approx(1 / 2.4, rel=1e-4)
    assert np.isinf(lag(Gains("P", 0.8), 0))


def test_damping_counts_the_pair_that_shows_and_not_the_chains_of_the_dead_time():
    """K/(s (s + 2 z w)) sampled fast: closed-loop damping z, whatever the dead time's fast pairs do."""
    zeta, w, interval = 0.5, 1.0, 0.002
    plant = Plant((w * w,), (1.0, 2 * zeta * w, 0.0), 0.02)
    bank = build_bank([plant], interval)
    law = law_columns(columns_of([Gains("P", 1.0)]), interval)
    poles = poles_of(spectra_of(bank), ONE, law, starting_poles(bank, ONE, law), bank.delay)
    assert poles.damping[0] == pytest.approx(zeta, abs=0.02)
    chains = -poles.s.real / np.abs(poles.s)
    assert np.nanmin(chains[np.abs(poles.s.imag) > 1.0]) < 0.46  # such pairs are there, and are rightly left out


def test_poles_are_roots_of_the_exact_loop():
    """1 + L(exp(s T)) vanishes at each of them, whatever the starts were."""
    bank = build_bank(PLANTS[:2], T)
    spectra, which = spectra_of(bank), np.arange(2)
    law = law_columns(columns_of([Gains("PI", 0.2, 0.3)] * 2), T)
    exact = starting_poles(bank, which, law)
    slow = np.where(np.abs(exact) < 30, exact, np.nan)
    found = poles_of(spectra, which, law, exact * (1 + 0.01j), bank.delay).s
    for i in range(2):
        for pole in slow[:, i][np.isfinite(slow[:, i])]:
            assert np.nanmin(np.abs(found[:, i] - pole)) < 1e-6 * abs(pole)
