"""Second-order laws, error constants and frequency response figures, by their row of the list of check values."""

import math

import numpy as np
import pytest
from gainwright.design.locus.crossings import axis_crossings
from gainwright.design.locus.loop import OpenLoop
from gainwright.design.locus.wish import damping_ratio_for_overshoot, pole_for_peak
from gainwright.design.margins import gain_crossovers, margins
from scipy import signal


def decibels(value: float) -> float:
    return 20.0 * math.log10(value)


def servo(damping: float) -> OpenLoop:
    """1/(s(s + 2 z)): natural frequency one."""
    return OpenLoop((1.0,), (1.0, 2.0 * damping, 0.0))


@pytest.mark.parametrize(
    ("overshoot", "damping"), [(0.16, 0.504), (0.20, 0.456), (0.10, 0.591), (0.05, 0.690), (0.574, 0.174)]
)
def test_so_02_damping_ratio_of_an_overshoot(overshoot: float, damping: float) -> None:
    """Formula in a public course note; Nise: 16 % 0.504, 20 % 0.456, 10 % 0.591, 5 % 0.690."""
    found = damping_ratio_for_overshoot(overshoot)
    assert found == pytest.approx(damping, abs=5e-4)
    time = np.linspace(0.0, 20.0, 20001)
    _, step = signal.step(([1.0], [1.0, 2.0 * found, 1.0]), T=time)
    assert step.max() - 1.0 == pytest.approx(overshoot, abs=1e-6)  # grid of 1 ms: the peak is flat to 1e-7


def test_so_03_peak_time_of_a_pole() -> None:
    """Exact law Tp = pi/(wn sqrt(1 - z^2)), against the peak of an independent simulation (grid 0.5 ms)."""
    pole = pole_for_peak(0.2, 1.5)
    time = np.arange(0.0, 4.0, 5e-4)
    _, step = signal.step(([abs(pole) ** 2], [1.0, -2.0 * pole.real, abs(pole) ** 2]), T=time)
    assert time[np.argmax(step)] == pytest.approx(1.5, abs=1e-3)
    assert step.max() == pytest.approx(1.2, abs=1e-5)


@pytest.mark.parametrize(
    ("damping", "margin"),
    [(0.1, 11.42), (0.2, 22.60), (0.3, 33.27), (0.4, 43.12), (0.5, 51.83), (0.6, 59.19), (0.7, 65.16), (0.8, 69.86)],
)
def test_so_15_phase_margin_of_a_damping_ratio(damping: float, margin: float) -> None:
    """Ogata 5e Sec. 7-8, Nise Sec. 10.10 (from memory): 11.4 22.6 33.3 43.1 51.8 59.2 65.2 69.9 deg."""
    assert margins(servo(damping), 1.0).phase_margin_deg == pytest.approx(margin, abs=6e-3)


@pytest.mark.parametrize(("damping", "peak"), [(0.1, 5.0252), (0.3, 1.7471), (0.5, 1.1547)])
def test_so_16_resonance_peak(damping: float, peak: float) -> None:
    """Exact law Mr = 1/(2 z sqrt(1 - z^2))."""
    assert margins(servo(damping), 1.0).peak_complementary == pytest.approx(peak, abs=6e-5)


@pytest.mark.parametrize(("damping", "bandwidth"), [(0.5, 1.2720), (0.7, 1.0100)])
def test_so_16_bandwidth(damping: float, bandwidth: float) -> None:
    """Exact law: the closed loop falls to 1/sqrt(2) at 1.272 wn for z = 0.5 and 1.010 wn for z = 0.7."""
    closed = OpenLoop((1.0,), (1.0, 2.0 * damping, 1.0))
    assert gain_crossovers(closed, math.sqrt(2.0))[-1] == pytest.approx(bandwidth, abs=6e-5)


@pytest.mark.parametrize(
    ("zeros", "poles", "constant", "error"),
    [
        ((-2, -5), (-8, -10, -12), 5.208, 1 / 6.208),
        ((-2, -5, -6), (0, -8, -10, -12), 31.25, 0.032),
        ((-2, -4, -5, -6, -7), (0, 0, -8, -10, -12), 875.0, 1.14e-3),
    ],
)
def test_so_17_error_constants(
    zeros: tuple[float, ...], poles: tuple[float, ...], constant: float, error: float
) -> None:
    """Nise, Ex. 7.4 (from memory): Kp = 5.208; Kv = 31.25, ess 0.032; Ka = 875, ess 1.14e-3 with 500 in front."""
    loop = OpenLoop(tuple(500.0 * np.poly(zeros)), tuple(np.poly(poles)))
    assert loop.static_gain == pytest.approx(constant, abs=5e-4)
    found = 1.0 / loop.static_gain if 0 in poles else 1.0 / (1.0 + loop.static_gain)
    assert found == pytest.approx(error, rel=3e-3)


@pytest.mark.parametrize(
    ("frequency", "level", "angle"),
    [(1.0, -3.0103, -45.0), (0.5, -0.9691, -26.565), (2.0, -6.9897, -63.435), (10.0, -20.0432, -84.289)],
)
def test_fr_11_first_order_corner(frequency: float, level: float, angle: float) -> None:
    """Exact: -3.01 dB and -45 deg at the corner, an octave below and above, a decade above."""
    value = complex(OpenLoop((1.0,), (1.0, 1.0)).at(1j * frequency))
    assert decibels(abs(value)) == pytest.approx(level, abs=6e-5)
    assert math.degrees(np.angle(value)) == pytest.approx(angle, abs=6e-4)


@pytest.mark.parametrize(("share", "angle"), [(0.1, 54.90), (0.24, 37.80), (0.5, 19.47), (0.25, 36.87)])
def test_fr_12_largest_lead(share: float, angle: float) -> None:
    """Exact asin((1 - a)/(1 + a)); Ogata 5e, Ex. 7-26 uses a = 0.24 for 38 deg. Largest on a fine grid."""
    lead = OpenLoop((1.0, 1.0), (share, 1.0))
    w = np.geomspace(0.1, 100.0, 20001)
    assert math.degrees(np.angle(lead.at(1j * w)).max()) == pytest.approx(angle, abs=6e-3)


def test_fr_13_lead_in_the_frequency_domain() -> None:
    """Ogata 5e, Ex. 7-26: 4/(s(s+2)), Kv = 20, PM 50: K = 10, 41.7(s+4.41)/(s+18.4), wc = 9; PM 17.96 at 6.168 before,
    50.51 at 8.890 after, Kv = 19.99 (computed independently)."""
    before = margins(OpenLoop((4.0,), (1.0, 2.0, 0.0)), 10.0)
    assert before.phase_margin_deg == pytest.approx(17.96, abs=6e-3)
    assert before.phase_crossover == pytest.approx(6.168, abs=6e-4)
    loop = OpenLoop(tuple(4.0 * np.array([1.0, 4.41])), tuple(np.polymul([1.0, 2.0, 0.0], [1.0, 18.4])))
    after = margins(loop, 41.7)
    assert after.phase_margin_deg == pytest.approx(50.51, abs=6e-3)
    assert after.phase_margin_deg >= 50.0
    assert after.phase_crossover == pytest.approx(8.890, abs=6e-4)
    assert after.phase_crossover == pytest.approx(9.0, rel=0.02)
    assert 41.7 * loop.static_gain == pytest.approx(19.99, abs=6e-3)


def test_fr_14_margins_are_exact_not_sketched() -> None:
    """Ogata 5e, Sec. 7-7: 21 deg, 8 dB at K = 10 and -30 deg, -12 dB at K = 100 come from a straight-line sketch; exact
    25.39 deg, 9.54 dB and -23.65 deg, -10.46 dB, and the gain margin is 20 log10(30/K)."""
    loop = OpenLoop((1.0,), (1.0, 6.0, 5.0, 0.0))
    assert axis_crossings(loop)[0].loop_gain == pytest.approx(30.0, rel=1e-12)
    ten, hundred = margins(loop, 10.0), margins(loop, 100.0)
    assert ten.gain_margin_db == pytest.approx(decibels(3.0), rel=1e-12)
    assert hundred.gain_margin_db == pytest.approx(decibels(0.3), rel=1e-12)
    assert ten.phase_margin_deg == pytest.approx(25.39, abs=6e-3)
    assert hundred.phase_margin_deg == pytest.approx(-23.65, abs=6e-3)
    assert ten.stable
    assert not hundred.stable
    assert ten.phase_margin_deg == pytest.approx(21.0, abs=5.0)
    assert hundred.phase_margin_deg == pytest.approx(-30.0, abs=7.0)
