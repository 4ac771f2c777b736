"""Published and exact check values for loops with dead time, by their row of the list of check values."""

import math

import numpy as np
import pytest
from gainwright.design.locus.crossings import axis_crossings
from gainwright.design.locus.loop import OpenLoop
from gainwright.design.locus.roots import closed_loop_roots
from gainwright.design.locus.stability import stable_gain_intervals
from gainwright.design.margins import margins

# Pade numerators of exp(-s) in (s), highest power first; the denominator has the signs of odd powers turned
PADE = {1: (0.5, 1.0), 2: (1 / 12, 0.5, 1.0), 3: (1 / 120, 0.1, 0.5, 1.0)}


def pade(order: int, extra: tuple[float, ...] = (1.0,)) -> OpenLoop:
    below = np.array(PADE[order])
    above = below * (-1.0) ** np.arange(order, -1, -1)
    return OpenLoop(tuple(above), tuple(np.polymul(below, extra)))


def standard_pi(
    numerator: tuple[float, ...], denominator: tuple[float, ...], dead_time: float, integral_time: float
) -> OpenLoop:
    """Plant times (s + 1/Ti)/s; K is the controller gain."""
    return OpenLoop(
        tuple(np.polymul(numerator, (1.0, 1.0 / integral_time))), tuple(np.polymul(denominator, (1.0, 0.0))), dead_time
    )


@pytest.mark.parametrize(("gain", "dead_time"), [(1.0, 1.0), (2.5, 0.3), (0.04, 12.0)])
def test_dt_01_integrator_with_dead_time(gain: float, dead_time: float) -> None:
    """Exact law: Ku = pi/(2 K L), wu = pi/(2 L), Pu = 4 L."""
    first = axis_crossings(OpenLoop((gain,), (1.0, 0.0), dead_time))[0]
    assert first.loop_gain == pytest.approx(math.pi / (2 * gain * dead_time), rel=1e-12)
    assert 2 * math.pi / first.frequency == pytest.approx(4 * dead_time, rel=1e-12)


@pytest.mark.parametrize(
    ("ratio", "gain", "frequency", "period"),
    [
        (0.1, 16.350554, 16.319945, 3.85000),
        (0.2, 8.502425, 8.443413, 3.72076),
        (0.5, 3.806883, 3.673194, 3.42110),
        (1.0, 2.261826, 2.028758, 3.09706),
        (2.0, 1.519803, 1.144465, 2.74503),
        (5.0, 1.132112, 0.530732, 2.36774),
    ],
)
def test_dt_02_lag_with_dead_time(ratio: float, gain: float, frequency: float, period: float) -> None:
    """Exact law wL + atan(wT) = pi, Ku K = sqrt(1 + (wT)^2), to 1e-9; digits beside it."""
    first = axis_crossings(OpenLoop((1.0,), (1.0, 1.0), ratio))[0]
    w = first.frequency
    assert w * ratio + math.atan(w) == pytest.approx(math.pi, rel=1e-12)
    assert first.loop_gain == pytest.approx(math.hypot(1.0, w), rel=1e-9)
    assert (first.loop_gain, w) == pytest.approx((gain, frequency), abs=6e-7)
    assert 2 * math.pi / w / ratio == pytest.approx(period, abs=6e-6)


@pytest.mark.parametrize(
    ("order", "at_one", "at_pi"), [(1, -53.13, -115.04), (2, -57.221, -167.10), (3, -57.295, -178.86)]
)
def test_dt_04_the_exact_delay_is_no_pade(order: int, at_one: float, at_pi: float) -> None:
    """Pade coefficients 1/2; 1/2, 1/12; 1/2, 1/10, 1/120 turn too little; the delay turns -57.296 and -180 deg."""
    exact = OpenLoop((1.0,), (1.0,), 1.0)
    assert math.degrees(np.angle(exact.at(1j))) == pytest.approx(-57.29578, abs=5e-6)
    assert abs(math.degrees(np.angle(exact.at(1j * math.pi)))) == pytest.approx(180.0, abs=1e-9)
    assert math.degrees(np.angle(pade(order).at(1j))) == pytest.approx(at_one, abs=6e-3)
    assert math.degrees(np.angle(pade(order).at(1j * math.pi))) == pytest.approx(at_pi, abs=6e-3)


def test_dt_05_pade_overstates_the_critical_gain() -> None:
    """L = T: 3.000 (order 1), 2.2915 (order 2) for 2.2618; integrator: 2.000 for 1.5708."""
    lag = (1.0, 1.0)
    assert axis_crossings(pade(1, lag))[0].loop_gain == pytest.approx(3.0, rel=1e-12)
    assert axis_crossings(pade(2, lag))[0].loop_gain == pytest.approx(2.2915, abs=5e-5)
    assert axis_crossings(OpenLoop((1.0,), lag, 1.0))[0].loop_gain == pytest.approx(2.2618, abs=5e-5)
    assert axis_crossings(pade(1, (1.0, 0.0)))[0].loop_gain == pytest.approx(2.0, rel=1e-12)
    assert axis_crossings(OpenLoop((1.0,), (1.0, 0.0), 1.0))[0].loop_gain == pytest.approx(1.5708, abs=5e-5)


def test_dt_06_delay_margin() -> None:
    """Skogestad, J. Process Control 13 (2003) 291-309, Table 1 (from memory): 0.5 exp(-s)/s allows 2.14 more."""
    found = margins(OpenLoop((1.0,), (1.0, 0.0), 1.0), 0.5)
    assert found.delay_margin == pytest.approx(2.14, abs=5e-3)
    assert found.delay_margin == pytest.approx(math.pi - 1.0, rel=1e-12)  # (pi/2 - 0.5)/0.5
    edge = OpenLoop((1.0,), (1.0, 0.0), 1.0 + found.delay_margin)
    assert stable_gain_intervals(edge)[0][1] == pytest.approx(0.5, rel=1e-12)


def test_dt_07_every_margin_of_a_servo_loop() -> None:
    """1/(s(s+1)): PM 51.8 deg at 0.786 (any text); 51.827, 0.786151, DM 1.1506 s, Ms 1.4679, Mt 1.1547 exactly."""
    found = margins(OpenLoop((1.0,), (1.0, 1.0, 0.0)), 1.0)
    assert found.phase_margin_deg == pytest.approx(51.827, abs=5e-4)
    assert found.phase_crossover == pytest.approx(0.786151, abs=5e-7)
    assert found.delay_margin == pytest.approx(1.1506, abs=5e-5)
    assert found.peak_sensitivity == pytest.approx(1.4679, abs=5e-5)
    assert found.peak_complementary == pytest.approx(1.1547, abs=5e-5)
    assert found.gain_margin == math.inf


def test_dt_08_heat_exchanger() -> None:
    """Franklin, Powell & Emami-Naeini, Ex. 4.8-4.9 (from memory): Ku = 15.3; its Pu = 42 s is a graph
    reading (4 %) of 43.559; Ms of its PI settings 6.22/43.3 and 6.885/35 is 3.20 and 4.44 (computed independently)."""
    below = tuple(np.polymul((10.0, 1.0), (60.0, 1.0)))
    first = axis_crossings(OpenLoop((1.0,), below, 5.0))[0]
    assert first.loop_gain == pytest.approx(15.2916, abs=5e-5)
    assert first.loop_gain == pytest.approx(15.3, abs=0.05)
    assert 2 * math.pi / first.frequency == pytest.approx(43.559, abs=5e-4)
    assert 2 * math.pi / first.frequency == pytest.approx(42.0, rel=0.04)
    assert margins(standard_pi((1.0,), below, 5.0, 43.3), 6.22).peak_sensitivity == pytest.approx(3.20, abs=5e-3)
    assert margins(standard_pi((1.0,), below, 5.0, 35.0), 6.885).peak_sensitivity == pytest.approx(4.44, abs=5e-3)


@pytest.mark.parametrize(
    ("peak", "gain_bound", "phase_bound"),
    [(2.0, 2.0, 28.955), (1.7, 2.4286, 34.209), (1.59, 2.6949, 36.657), (1.4, 3.5, 41.850)],
)
def test_dt_09_margins_agree_with_the_peak_sensitivity(peak: float, gain_bound: float, phase_bound: float) -> None:
    """Exact bounds GM >= Ms/(Ms-1), PM >= 2 asin(1/(2 Ms)) (Skogestad & Postlethwaite; Astrom & Hagglund) at the K of
    exp(-s)/(s (0.3 s + 1)) that has this Ms."""
    loop = OpenLoop((1.0,), (0.3, 1.0, 0.0), 1.0)
    low, high = 0.01, 0.9 * axis_crossings(loop)[0].loop_gain
    for _ in range(40):
        middle = 0.5 * (low + high)
        low, high = (middle, high) if margins(loop, middle).peak_sensitivity < peak else (low, middle)
    found = margins(loop, low)
    assert found.peak_sensitivity == pytest.approx(peak, rel=1e-9)
    assert gain_bound - 5e-4 <= found.gain_margin < 1.4 * gain_bound
    assert phase_bound - 5e-3 <= found.phase_margin_deg < 2.0 * phase_bound


def test_roots_at_the_critical_gain_lie_on_the_axis() -> None:
    """Closed form: at Ku of DT-01 the loop has the pair +- j pi/(2 L), and no root right of it."""
    roots = closed_loop_roots(OpenLoop((1.0,), (1.0, 0.0), 2.0), math.pi / 4.0)
    assert roots[0] == pytest.approx(1j * math.pi / 4.0, abs=1e-12)
