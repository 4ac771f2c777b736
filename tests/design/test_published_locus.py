"""Published root locus examples, by their row of the list of check values.

Tolerances: half a unit of the last printed digit, unless the row says that the print was read off a graph; then the
exact value is asserted tightly and the print within the stated share. Exact values follow from the closed forms written
beside them or were computed independently (numpy/mpmath) for that list.
"""

import math

import numpy as np
import pytest
from gainwright.design.locus.condition import angle_residual_deg, loop_gain_at
from gainwright.design.locus.crossings import axis_crossings, ray_crossings
from gainwright.design.locus.loop import OpenLoop
from gainwright.design.locus.nearest import nearest_point_on_locus
from gainwright.design.locus.roots import closed_loop_roots
from gainwright.design.locus.special_points import arrivals, asymptotes, breakaway_points, departures, saddle_points
from gainwright.design.locus.wish import (
    angle_wanted_deg,
    damping_ratio_for_overshoot,
    lead_by_bisector,
    pole_for_peak,
    zero_for_point,
)


def loop_of(zeros: list[complex], poles: list[complex], lead: float = 1.0) -> OpenLoop:
    numerator = lead * np.atleast_1d(np.poly(zeros)).real
    return OpenLoop(tuple(numerator), tuple(np.atleast_1d(np.poly(poles)).real))


def real_root(loop: OpenLoop, gain: float) -> float:
    roots = closed_loop_roots(loop, gain)
    return float(min(roots[np.abs(roots.imag) < 1e-9].real))


def departure(loop: OpenLoop, pole: complex) -> float:
    return next(d.angles_deg[0] for d in departures(loop) if abs(d.root - pole) < 1e-6)


THREE = loop_of([], [0, -1, -2])


def test_rl_01_critical_gain_of_three_lags() -> None:
    """Ogata, Modern Control Engineering 5e, Ex. 6-1 (from memory): K = 6 at sqrt(2)."""
    (crossing,) = axis_crossings(THREE)
    assert crossing.loop_gain == pytest.approx(6.0, rel=1e-12)
    assert crossing.frequency == pytest.approx(math.sqrt(2.0), rel=1e-12)
    assert crossing.direction == 1


def test_rl_02_breakaway_and_the_rejected_root() -> None:
    """As RL-01: -0.4226 kept, -1.5774 rejected for K < 0; exact -1 +- 1/sqrt(3)."""
    kept, rejected = saddle_points(THREE)
    assert kept.point.real == pytest.approx(-1 + 1 / math.sqrt(3), rel=1e-12)
    assert kept.loop_gain == pytest.approx(0.38490, abs=5e-6)
    assert kept.on_locus
    assert rejected.point.real == pytest.approx(-1.5774, abs=5e-5)
    assert rejected.loop_gain < 0.0
    assert not rejected.on_locus
    assert [p.point for p in breakaway_points(THREE)] == [kept.point]


def test_rl_03_gain_on_the_ray_of_damping_one_half() -> None:
    """As RL-01. Print K = 1.0383 read off a graph (0.3 %); exact K = 28/27, s = -1/3 +- j/sqrt(3), third pole -7/3."""
    (point,) = ray_crossings(THREE, 0.5)
    assert point.loop_gain == pytest.approx(28 / 27, rel=1e-9)
    assert point.point == pytest.approx(complex(-1 / 3, 1 / math.sqrt(3)), rel=1e-9)
    assert point.loop_gain == pytest.approx(1.0383, rel=3e-3)
    assert real_root(THREE, point.loop_gain) == pytest.approx(-7 / 3, rel=1e-9)


def test_rl_04_asymptotes() -> None:
    """As RL-01: 60, 180, 300 deg about -1."""
    lines = asymptotes(THREE)
    assert sorted(a % 360 for a in lines.angles_deg) == pytest.approx([60.0, 180.0, 300.0], abs=1e-9)
    assert lines.centroid == pytest.approx(-1.0, abs=1e-12)


def test_rl_05_crossing_breakaway_and_two_rays() -> None:
    """Public companion file of a textbook, Ex. 7.24.7: K = 48 at 2.83. Its K = 14.87 is a graph reading (3 %), exact
    14.4722; its breakaway -0.842 a slip for -0.845."""
    loop = loop_of([], [0, -2, -4])
    (crossing,) = axis_crossings(loop)
    assert crossing.loop_gain == pytest.approx(48.0, rel=1e-12)
    assert crossing.frequency == pytest.approx(2.83, abs=5e-3)
    (breakaway,) = breakaway_points(loop)
    assert breakaway.point.real == pytest.approx(-0.845299, abs=5e-7)
    assert breakaway.loop_gain == pytest.approx(3.0792, abs=5e-5)
    (point,) = ray_crossings(loop, 0.3)
    assert point.loop_gain == pytest.approx(14.4722, abs=5e-5)
    assert point.point == pytest.approx(-0.51158 + 1.62671j, abs=1e-5)
    assert point.loop_gain == pytest.approx(14.87, rel=0.03)
    (looser,) = ray_crossings(loop, damping_ratio_for_overshoot(0.4))
    assert looser.loop_gain == pytest.approx(15.423, abs=5e-4)


def test_rl_06_complex_breakaway_points_and_departure() -> None:
    """Same file, Ex. 7.24.4: breakaways -2 and -2 +- j1.58, departure -90 deg; crossing 146.25 at 2.54951."""
    loop = loop_of([], [0, -4, -2 + 3j, -2 - 3j])
    points = breakaway_points(loop)
    assert [p.point.real for p in points] == pytest.approx([-2.0, -2.0, -2.0], abs=1e-9)
    assert sorted(p.point.imag for p in points) == pytest.approx([-math.sqrt(2.5), 0.0, math.sqrt(2.5)], abs=1e-9)
    assert [p.loop_gain for p in points] == pytest.approx([36.0, 42.25, 42.25], rel=1e-9)
    assert departure(loop, -2 + 3j) == pytest.approx(-90.0, abs=1e-9)
    (crossing,) = axis_crossings(loop)
    assert (crossing.loop_gain, crossing.frequency) == pytest.approx((146.25, 2.54951), rel=1e-6)


def test_rl_10_break_in_beside_a_zero() -> None:
    """Ogata 5e, Ex. 6-2 (from memory): break-in -3.732 at K = 5.464, departure 145 deg, z = 0.7: K = 1.34 (1 %)."""
    loop = loop_of([-2], [-1 + 1j * math.sqrt(2), -1 - 1j * math.sqrt(2)])
    (point,) = breakaway_points(loop)
    assert point.point.real == pytest.approx(-2 - math.sqrt(3), rel=1e-12)
    assert point.loop_gain == pytest.approx(2 + 2 * math.sqrt(3), rel=1e-12)
    assert departure(loop, -1 + 1j * math.sqrt(2)) == pytest.approx(144.736, abs=5e-4)
    (arrival,) = arrivals(loop)
    assert arrival.angles_deg == pytest.approx((180.0,))
    (crossing,) = ray_crossings(loop, 0.7)
    assert crossing.loop_gain == pytest.approx(1.33171, abs=5e-6)
    assert crossing.point == pytest.approx(-1.66586 + 1.69951j, abs=1e-5)
    assert crossing.loop_gain == pytest.approx(1.34, rel=0.01)


def test_rl_11_lightly_damped_mode() -> None:
    """Ogata 5e, Ex. 6-4 (plot only); numbers computed independently: -91.81 deg, 26.1570 at 2.13201, -0.24968."""
    loop = OpenLoop((1.0,), tuple(np.polymul([1, 0.5, 0], [1, 0.6, 10])))
    pole = complex(-0.3, math.sqrt(9.91))
    assert departure(loop, pole) == pytest.approx(-91.81, abs=5e-3)
    (crossing,) = axis_crossings(loop)
    assert crossing.loop_gain == pytest.approx(26.1570, abs=5e-5)
    assert crossing.frequency == pytest.approx(2.13201, abs=5e-6)
    first = breakaway_points(loop)[0]
    assert (first.point.real, first.loop_gain) == pytest.approx((-0.24968, 0.61953), abs=5e-6)


def test_rl_12_departure_ray_and_crossing() -> None:
    """Franklin, Powell & Emami-Naeini, Sec. 5.2-5.3 (from memory): centroid -2.67, departure -45 deg, K about 65 for
    z = 0.5 (graph; exact 64 at -2 + j3.46410), K = 256 at 5.66."""
    loop = OpenLoop((1.0,), (1.0, 8.0, 32.0, 0.0))
    assert asymptotes(loop).centroid == pytest.approx(-8 / 3, rel=1e-12)
    assert departure(loop, -4 + 4j) == pytest.approx(-45.0, abs=1e-9)
    (point,) = ray_crossings(loop, 0.5)
    assert point.loop_gain == pytest.approx(64.0, rel=1e-12)
    assert point.point == pytest.approx(complex(-2, 2 * math.sqrt(3)), rel=1e-12)
    assert point.loop_gain == pytest.approx(65.0, rel=0.02)
    assert real_root(loop, 64.0) == pytest.approx(-4.0, rel=1e-9)
    (crossing,) = axis_crossings(loop)
    assert (crossing.loop_gain, crossing.frequency) == pytest.approx((256.0, math.sqrt(32.0)), rel=1e-12)


def test_rl_13_the_shapes_of_a_double_integrator_with_lead() -> None:
    """Franklin, Powell & Emami-Naeini, Ex. 5.4-5.6 (numbers from memory): p = 12: -2.3 and -5.18; p = 9: triple point
    -3; p = 4: none on the axis."""
    two = breakaway_points(loop_of([-1], [0, 0, -12]))
    assert [p.point.real for p in two] == pytest.approx([-2.31386, -5.18614], abs=5e-6)
    assert [p.loop_gain for p in two] == pytest.approx([39.4708, 43.7792], abs=5e-5)
    (triple,) = breakaway_points(loop_of([-1], [0, 0, -9]))
    assert triple.branches == 3
    assert (triple.point.real, triple.loop_gain) == pytest.approx((-3.0, 27.0), rel=1e-9)
    assert breakaway_points(loop_of([-1], [0, 0, -4])) == ()


def test_rl_14_collocated_mode_departs_to_the_left() -> None:
    """Franklin, Powell & Emami-Naeini, Ex. 5.7 (plant public; number computed independently): 141.485 deg."""
    mode = np.polyadd(np.polymul([1, 0.1], [1, 0.1]), [6.6**2])
    numerator = np.polymul([1, 1], np.polyadd(np.polymul([1, 0.1], [1, 0.1]), [36.0]))
    loop = OpenLoop(tuple(numerator), tuple(np.polymul(np.polymul([1, 12], [1, 0, 0]), mode)))
    assert departure(loop, -0.1 + 6.6j) == pytest.approx(141.485, abs=5e-4)


def test_rl_15_crossing_with_a_zero() -> None:
    """Nise, Control Systems Engineering, Ex. 8.2 & 8.5 (from memory): centroid -4/3, K = 9.65 at 1.59."""
    loop = loop_of([-3], [0, -1, -2, -4])
    assert asymptotes(loop).centroid == pytest.approx(-4 / 3, rel=1e-9)
    (crossing,) = axis_crossings(loop)
    assert crossing.loop_gain == pytest.approx(9.645581, abs=5e-7)
    assert crossing.frequency == pytest.approx(1.587702, abs=5e-7)
    assert (crossing.loop_gain, crossing.frequency) == pytest.approx((9.65, 1.59), abs=5e-3)


def test_rl_17_departure_wraps() -> None:
    """Nise, Ex. 8.6 (from memory): -251.6 deg, which is 108.4 deg."""
    loop = loop_of([-2], [-3, -1 + 1j, -1 - 1j])
    assert departure(loop, -1 + 1j) == pytest.approx(108.4349, abs=5e-5)
    assert departure(loop, -1 + 1j) - 360.0 == pytest.approx(-251.6, abs=0.05)


def test_rl_19_every_crossing_of_a_ray_is_offered() -> None:
    """Nise, Ex. 8.8 (from memory): K = 7.36, 12.79, 39.64 (graph readings, 0.4 %); exact beside them."""
    loop = loop_of([-1.5], [0, -1, -10])
    points = ray_crossings(loop, 0.8)
    assert [p.loop_gain for p in points] == pytest.approx([7.33624, 12.82042, 39.62165], abs=5e-6)
    assert [p.loop_gain for p in points] == pytest.approx([7.36, 12.79, 39.64], rel=4e-3)
    assert [p.point for p in points] == pytest.approx([-0.87 + 0.66j, -1.19 + 0.90j, -4.60 + 3.45j], abs=0.01)
    thirds = [real_root(loop, p.loop_gain) for p in points]
    assert thirds == pytest.approx([-9.2554, -8.6086, -1.7960], abs=5e-5)


def test_rl_20_proportional_then_proportional_integral() -> None:
    """Nise, Ex. 9.1 (from memory), 0.1 %: P: K = 164.6 at -0.694 + j3.926, third -11.61, Kp = 8.23, ess = 0.108; PI,
    zero 0.1: K = 158.2 at -0.678 + j3.837, poles -11.55 and -0.0902."""
    plant = loop_of([], [-1, -2, -10])
    (p,) = ray_crossings(plant, 0.174)
    assert p.loop_gain == pytest.approx(164.532, abs=5e-4)
    assert p.loop_gain == pytest.approx(164.6, rel=1e-3)
    assert p.point == pytest.approx(-0.694 + 3.926j, rel=1e-3)
    assert real_root(plant, p.loop_gain) == pytest.approx(-11.61, abs=5e-3)
    position = p.loop_gain * plant.static_gain
    assert (position, 1 / (1 + position)) == pytest.approx((8.23, 0.108), rel=5e-3)
    with_integral = loop_of([-0.1], [0, -1, -2, -10])
    (pi, *_) = ray_crossings(with_integral, 0.174)
    assert pi.loop_gain == pytest.approx(158.097, abs=5e-4)
    assert pi.loop_gain == pytest.approx(158.2, rel=1e-3)
    assert pi.point == pytest.approx(-0.678 + 3.837j, rel=1e-3)
    real = sorted(r.real for r in closed_loop_roots(with_integral, pi.loop_gain) if abs(r.imag) < 1e-9)
    assert real == pytest.approx([-11.5543, -0.0902], abs=5e-5)


def test_rl_22_zero_from_the_angle_condition() -> None:
    """Nise, Ex. 9.3 (from memory), 0.05 %: P: K = 43.35 at -1.205 + j2.064, third -7.59; PD three times as fast:
    -3.613 + j6.193, zero 3.006, K = 47.45."""
    plant = loop_of([], [0, -4, -6])
    (p,) = ray_crossings(plant, 0.504)  # 16 % overshoot as rounded in the book
    assert p.loop_gain == pytest.approx(43.362, abs=5e-4)
    assert p.loop_gain == pytest.approx(43.35, rel=5e-4)
    assert p.point == pytest.approx(-1.205 + 2.064j, rel=5e-4)
    assert real_root(plant, p.loop_gain) == pytest.approx(-7.5908, abs=5e-5)
    assert damping_ratio_for_overshoot(0.16) == pytest.approx(0.504, abs=5e-4)
    wished = -3.613 + 6.193j  # three times the point as printed
    assert wished == pytest.approx(3.0 * p.point, rel=5e-4)
    zero = zero_for_point(plant, wished)
    assert zero == pytest.approx(3.0052, abs=5e-5)
    assert zero == pytest.approx(3.006, rel=5e-4)
    compensated = loop_of([-zero], [0, -4, -6])
    assert angle_residual_deg(compensated, wished) == pytest.approx(0.0, abs=1e-9)
    assert loop_gain_at(loop_of([-3.006], [0, -4, -6]), wished) == pytest.approx(47.4525, abs=5e-5)
    assert loop_gain_at(compensated, wished) == pytest.approx(47.45, abs=5e-3)


def test_rl_23_pid_by_the_locus() -> None:
    """Nise, Ex. 9.5 (from memory): P: K = 121.5 at -5.415 + j10.57, third -8.169; PD: -8.13 + j15.87, zero 55.92,
    K = 5.34; PID, zero 0.5: K = 4.6 at -7.516 + j14.67, poles -8.099, -0.468; K1 = 259.5, K2 = 128.6, K3 = 4.6."""
    plant = loop_of([-8], [-3, -6, -10])
    damping = 0.456  # 20 % overshoot as rounded in the book
    assert damping_ratio_for_overshoot(0.2) == pytest.approx(damping, abs=5e-4)
    (p,) = ray_crossings(plant, damping)
    assert p.loop_gain == pytest.approx(121.522, abs=5e-4)
    assert p.point == pytest.approx(-5.41554 + 10.56956j, abs=1e-5)
    assert p.loop_gain == pytest.approx(121.5, abs=0.05)
    assert real_root(plant, p.loop_gain) == pytest.approx(-8.169, abs=5e-4)
    assert pole_for_peak(0.2, 2 / 3 * math.pi / p.point.imag) == pytest.approx(-8.13 + 15.87j, abs=0.02)
    wished = -8.13 + 15.87j
    zero = zero_for_point(plant, wished)
    assert zero == pytest.approx(55.926, abs=5e-4)
    assert loop_gain_at(loop_of([-8, -zero], [-3, -6, -10]), wished) == pytest.approx(5.3394, abs=5e-5)
    pid = loop_of([-8, -55.92, -0.5], [0, -3, -6, -10])
    found, second = ray_crossings(pid, damping)
    assert second.loop_gain == pytest.approx(20.84, abs=5e-3)
    assert found.loop_gain == pytest.approx(4.6, abs=0.005)
    assert found.point == pytest.approx(-7.516 + 14.67j, rel=1e-3)
    real = sorted(r.real for r in closed_loop_roots(pid, found.loop_gain) if abs(r.imag) < 1e-9)
    assert real == pytest.approx([-8.099, -0.468], abs=1e-3)
    gains = np.array([55.92 + 0.5, 55.92 * 0.5, 1.0]) * found.loop_gain
    assert gains == pytest.approx([259.5, 128.6, 4.6], rel=1e-3)


def test_rl_24_lead_by_the_bisector() -> None:
    """Ogata 3e/4e (from memory), 4/(s(s+2)), poles -2 +- j2 sqrt(3): zero 2.9, pole 5.4, K = 18.7, Kc = 4.68, Kv = 5.02
    are graph readings (1.5 %); exact zero 2.928203, pole 5.464102 (product 16), K = 18.9282, Kv = 5.0718."""
    plant = loop_of([], [0, -2], lead=4.0)
    wished = complex(-2, 2 * math.sqrt(3))
    assert angle_wanted_deg(plant, wished) == pytest.approx(30.0, abs=1e-9)
    zero, pole = lead_by_bisector(plant, wished)
    assert (zero, pole) == pytest.approx((2.928203, 5.464102), abs=5e-7)
    assert zero * pole == pytest.approx(16.0, rel=1e-12)
    lead = loop_of([-zero], [0, -2, -pole], lead=4.0)
    gain = loop_gain_at(lead, wished)
    assert 4.0 * gain == pytest.approx(18.9282, abs=5e-5)
    assert gain * lead.static_gain == pytest.approx(5.0718, abs=5e-5)
    assert (zero, pole, 4 * gain, gain, gain * lead.static_gain) == pytest.approx(
        (2.9, 5.4, 18.7, 4.68, 5.02), rel=0.015
    )


def test_rl_25_lead_by_the_bisector_and_by_cancelling() -> None:
    """Ogata 5e, Ex. 6-6 (numbers from memory), 10/(s(s+1)), -1.5 +- j2.5981: deficiency 40.89 deg, pole 4.6458; printed
    zero 1.9432 is 0.3 % off (z p must be 9: 1.9373), Kc of the printed pair 1.2287; zero 1, pole 3: Kc = 0.9."""
    plant = loop_of([], [0, -1], lead=10.0)
    wished = complex(-1.5, 1.5 * math.sqrt(3))
    assert angle_wanted_deg(plant, wished) == pytest.approx(40.8934, abs=5e-5)
    zero, pole = lead_by_bisector(plant, wished)
    assert (zero, pole) == pytest.approx((1.937254, 4.645751), abs=5e-7)
    assert zero == pytest.approx(1.9432, rel=4e-3)
    assert loop_gain_at(loop_of([-1.9432], [0, -1, -4.6458], lead=10.0), wished) == pytest.approx(1.2287, abs=5e-5)
    cancelling = loop_of([-1], [0, -1, -3], lead=10.0)
    assert loop_gain_at(cancelling, wished) == pytest.approx(0.9, rel=1e-9)
    assert angle_residual_deg(cancelling, wished) == pytest.approx(0.0, abs=1e-9)


def test_rl_26_lag_keeps_the_poles_and_raises_the_constant() -> None:
    """Ogata 5e, Ex. 6-7 (numbers from memory), 1.06/(s(s+1)(s+2)) with (s+0.05)/(s+0.005): before -0.3307 + j0.5864,
    Kv = 0.53; after K = 1.0235, Kc = 0.9656, Kv = 5.12, poles -0.31 + j0.55, -2.326, -0.0549."""
    plant = loop_of([], [0, -1, -2], lead=1.06)
    before = next(r for r in closed_loop_roots(plant, 1.0) if r.imag > 0)
    assert before == pytest.approx(-0.330697 + 0.586431j, abs=1e-6)
    assert plant.static_gain == pytest.approx(0.53, rel=1e-12)
    lag = loop_of([-0.05], [0, -1, -2, -0.005], lead=1.06)
    gain = loop_gain_at(lag, -0.31 + 0.55j)
    assert (1.06 * gain, gain) == pytest.approx((1.0235, 0.9656), abs=5e-5)
    assert gain * lag.static_gain == pytest.approx(5.12, abs=5e-3)
    roots = closed_loop_roots(lag, 1.0235 / 1.06)
    assert next(r for r in roots if r.imag > 0) == pytest.approx(-0.31225 + 0.55058j, abs=1e-5)
    assert sorted(r.real for r in roots if r.imag == 0) == pytest.approx([-2.32557, -0.05492], abs=5e-6)
    near = nearest_point_on_locus(lag, -0.31 + 0.55j)
    assert abs(near.point - (-0.31 + 0.55j)) < 0.01


def test_rl_27_lag_and_lead() -> None:
    """Ogata 5e, Ex. 6-8 (set-up public), 4/(s(s+0.5)), -2.5 + j4.33: lead (s+0.5)/(s+5.02), Kc = 6.26 (the book uses
    55 deg for 54.79); lag (s+0.2)/(s+0.0125) adds -1.90 deg and x 0.9818; Kv = 80 (79.8)."""
    plant = loop_of([], [0, -0.5], lead=4.0)
    wished = complex(-2.5, 4.33)
    assert angle_wanted_deg(plant, wished) == pytest.approx(54.79, abs=0.01)
    lead = loop_of([-0.5], [0, -0.5, -5.02], lead=4.0)
    assert loop_gain_at(lead, wished) == pytest.approx(6.26, abs=5e-3)
    assert angle_residual_deg(lead, wished) == pytest.approx(55.0 - 54.79, abs=0.02)
    lag = OpenLoop((1.0, 0.2), (1.0, 0.0125)).at(wished)
    assert math.degrees(np.angle(lag)) == pytest.approx(-1.90, abs=5e-3)
    assert abs(lag) == pytest.approx(0.9818, abs=5e-5)
    whole = loop_of([-0.5, -0.2], [0, -0.5, -5.02, -0.0125], lead=4.0)
    assert 6.26 * whole.static_gain == pytest.approx(79.8, abs=0.05)
