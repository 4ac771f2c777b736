"""The locus with exact dead time and hold against mpmath at 40 digits."""

import math

import mpmath
import numpy as np
import pytest
from gainwright.design.locus.condition import (
    LocusError,
    angle_residual_deg,
    loop_gain_at,
    point_on_locus,
    working,
)
from gainwright.design.locus.crossings import axis_crossings, circle_crossings, line_crossings, ray_crossings
from gainwright.design.locus.loop import OpenLoop, open_loop
from gainwright.design.locus.nearest import nearest_point_on_locus
from gainwright.design.locus.roots import closed_loop_roots
from gainwright.design.locus.special_points import breakaway_points, departures
from gainwright.ident.errors import RequestError
from gainwright.ident.plant import Plant

mpmath.mp.dps = 40

SERVO = OpenLoop((3.0, 6.0), (1.0, 5.0, 9.0, 5.0, 0.0), 0.2, 0.05)
LIGHT = OpenLoop((100.0,), (1.0, 0.04, 100.0), 0.05, 0.01)  # damping 0.002
UNSTABLE = OpenLoop((2.0, 1.0), (1.0, 0.3, -0.6), 0.15)


def polynomial(coefficients: tuple[float, ...], s: mpmath.mpc) -> mpmath.mpc:
    total = mpmath.mpc(0)
    for coefficient in coefficients:
        total = total * s + mpmath.mpf(coefficient)
    return total


def value(loop: OpenLoop, s: mpmath.mpc) -> mpmath.mpc:
    """G_L(s) with 40 digits."""
    ratio = polynomial(loop.numerator, s) / polynomial(loop.denominator, s)
    ratio *= mpmath.exp(-s * mpmath.mpf(loop.dead_time))
    if loop.hold is not None and s != 0:
        ratio *= (1 - mpmath.exp(-s * mpmath.mpf(loop.hold))) / (s * mpmath.mpf(loop.hold))
    return ratio


@pytest.mark.parametrize("s", [0.0, 1e-9, 1e-4 + 1e-5j, -3.0 + 2j, 0.4j, 10j, 2j * math.pi / 0.05 * 1.0001, -40.0 + 3j])
def test_the_loop_and_its_log_derivative_keep_their_digits(s: complex) -> None:
    """G_L to 1e-12 and G_L'/G_L to 1e-10 near s = 0, near a zero of the hold (four digits cancel) and far left."""
    loop = OpenLoop((3.0, 6.0), (1.0, 5.0, 9.0, 5.0), 0.2, 0.05)
    exact = value(loop, mpmath.mpc(s))
    assert abs(complex(loop.at(s)) - complex(exact)) <= 1e-11 * abs(complex(exact))
    slope = mpmath.diff(
        lambda x: mpmath.log(value(loop, x)), mpmath.mpc(s) if s else mpmath.mpc(1e-15), h=mpmath.mpf("1e-12")
    )
    assert abs(complex(loop.log_derivative(s)) - complex(slope)) <= 1e-10 * (1.0 + abs(complex(slope)))


@pytest.mark.parametrize("loop", [SERVO, LIGHT, UNSTABLE], ids=["servo", "damping 0.002", "unstable"])
def test_critical_gains_to_twelve_digits(loop: OpenLoop) -> None:
    """Each crossing solved anew by mpmath from a start 0.1 % off."""
    found = axis_crossings(loop, 3.0)
    assert found
    for crossing in found:
        if crossing.frequency == 0.0:
            continue
        w = mpmath.findroot(
            lambda x: mpmath.im(value(loop, mpmath.mpc(0, x))),
            (crossing.frequency * 0.99999, crossing.frequency * 1.00001),
        )
        gain = -1 / mpmath.re(value(loop, mpmath.mpc(0, w)))
        assert abs(crossing.loop_gain / float(gain) - 1.0) < 1e-12
        assert abs(crossing.frequency / float(w) - 1.0) < 1e-12


def test_the_conditionally_stable_set_of_an_unstable_plant() -> None:
    """(2s + 1)/(s^2 + 0.3 s - 0.6) with dead time needs K above 0.6 (real root through zero: K G_L(0) = -1)."""
    low, high = axis_crossings(UNSTABLE)[:2]
    assert (low.frequency, low.direction, low.roots) == (0.0, -1, 1)
    assert low.loop_gain == pytest.approx(0.6, rel=1e-14)
    assert high.direction == 1


@pytest.mark.parametrize(("loop", "gain", "left"), [(SERVO, 0.8, -8.0), (LIGHT, 0.005, -60.0), (UNSTABLE, 1.4, -25.0)])
def test_every_closed_loop_root_is_exact_and_none_is_missing(loop: OpenLoop, gain: float, left: float) -> None:
    """Each root to 1e-12 of mpmath's; their number by the argument principle on a rectangle, in mpmath's own values."""
    roots = closed_loop_roots(loop, gain, left)
    for root in roots:
        exact = mpmath.findroot(lambda s: 1 + gain * value(loop, s), mpmath.mpc(root))
        assert abs(complex(exact) - root) <= 1e-12 * abs(root)
    right, top = 8.0, 1.03 * float(np.max(np.abs(roots.imag))) + 3.0
    corners = [left + 0j - 1j * top, right - 1j * top, right + 1j * top, left + 1j * top]
    path = np.concatenate([np.linspace(a, b, 6000) for a, b in zip(corners, corners[1:] + corners[:1], strict=True)])
    below = np.polyval(loop.denominator, path)
    curve = below + gain * loop.at(path) * below
    inside = roots[(np.abs(roots.imag) < top) & (roots.real < right)]
    turns = np.angle(curve[1:] / curve[:-1]).sum() / (2 * np.pi)
    assert inside.size == round(float(turns))


@pytest.mark.parametrize("loop", [SERVO, UNSTABLE, OpenLoop((1.0,), (1.0, 3.0, 2.0, 0.0))])
def test_every_point_offered_lies_on_the_locus_and_on_the_path(loop: OpenLoop) -> None:
    """Ray, settling line and circle: residual angle below 1e-9 deg, and 1 + K G_L = 0 in mpmath to 1e-12."""
    points = [
        *ray_crossings(loop, 0.5),
        *line_crossings(loop, -0.3),
        *circle_crossings(loop, 1.1),
    ]
    assert len(points) >= 3
    for point in points:
        assert abs(point.angle_residual_deg) < 1e-9
        assert abs(complex(1 + point.loop_gain * value(loop, mpmath.mpc(point.point)))) < 1e-11
    for point in ray_crossings(loop, 0.5):
        assert -point.point.real / abs(point.point) == pytest.approx(0.5, rel=1e-12)
    for point in circle_crossings(loop, 1.1):
        assert abs(point.point) == pytest.approx(1.1, rel=1e-12)


@pytest.mark.parametrize("loop", [SERVO, LIGHT, UNSTABLE])
def test_no_crossing_of_a_ray_line_or_circle_is_missed(loop: OpenLoop) -> None:
    """As many as the sign changes of the residual angle on a grid of 50,000 points (an independent, slow way)."""
    ray = np.linspace(1e-6, 60.0, 50_000) * complex(-0.3, math.sqrt(0.91))
    line = -0.7 + 1j * np.linspace(1e-6, 60.0, 50_000)
    circle = 2.0 * np.exp(1j * np.linspace(math.pi - 1e-9, math.pi / 2, 50_000))
    for path, found in (
        (ray, ray_crossings(loop, 0.3, 60.0)),
        (line, line_crossings(loop, -0.7, 60.0)),
        (circle, circle_crossings(loop, 2.0)),
    ):
        turn = np.angle(-loop.at(path))
        changes = np.count_nonzero((turn[1:] * turn[:-1] < 0.0) & (np.abs(turn[1:] - turn[:-1]) < 1.0))
        assert sum(p.point.imag > 0.0 for p in found) == changes


def test_breakaway_with_dead_time() -> None:
    """exp(-L s)/(s (s + 1)): roots of 1/s + 1/(s+1) + L = 0, so L s^2 + (L + 2) s + 1 = 0; only the right one has K > 0
    between the poles."""
    dead_time = 0.4
    points = breakaway_points(OpenLoop((1.0,), (1.0, 1.0, 0.0), dead_time))
    exact = max(np.roots([dead_time, dead_time + 2.0, 1.0]))
    assert [p.point.real for p in points if p.point.real > -1.0] == pytest.approx([exact], rel=1e-12)
    assert points[0].loop_gain == pytest.approx(-exact * (exact + 1.0) * math.exp(exact * dead_time), rel=1e-12)


def test_breakaway_with_a_hold_solves_the_exact_equation() -> None:
    """G_L'(s) = 0 in mpmath, hold included."""
    loop = OpenLoop((1.0,), (1.0, 1.0, 0.0), 0.1, 0.3)
    point = breakaway_points(loop)[0]
    exact = mpmath.findroot(lambda s: mpmath.diff(lambda x: value(loop, x), s), mpmath.mpf(point.point.real))
    assert point.point.real == pytest.approx(float(mpmath.re(exact)), rel=1e-10)


def test_departure_turns_with_the_dead_time() -> None:
    """Closed form: 180 deg - 90 deg - w L for the upper pole of 1/((s + d)^2 + w^2); checked by a root at a small K."""
    loop = OpenLoop((1.0,), (1.0, 0.2, 4.01), 0.3)
    leaving = next(d for d in departures(loop) if d.root.imag > 0.0)
    assert leaving.angles_deg[0] == pytest.approx(90.0 - math.degrees(2.0 * 0.3), abs=1e-9)
    moved = point_on_locus(loop, 1e-6, -0.1 + 2j) - (-0.1 + 2j)
    assert math.degrees(np.angle(moved)) == pytest.approx(leaving.angles_deg[0], abs=1e-3)


def test_the_working_multiplies_out_to_the_gain() -> None:
    """Lengths of the vectors, dead-time and hold factor: product |G_L| = 1/K, as G_L itself gives."""
    s = -1.0 + 2.0j
    found = working(SERVO, s)
    product = 3.0 * found.zeros[0].length / math.prod(v.length for v in found.poles)
    product *= found.dead_time_factor * found.hold_factor
    assert found.dead_time_factor == pytest.approx(math.exp(0.2), rel=1e-14)
    assert product == pytest.approx(float(abs(value(SERVO, mpmath.mpc(s)))), rel=1e-12)
    assert found.loop_gain == pytest.approx(loop_gain_at(SERVO, s), rel=1e-12)


def test_the_nearest_point_is_the_nearest() -> None:
    """Against a dense list of closed-loop roots of 400 gains."""
    wished = -0.8 + 1.4j
    found = nearest_point_on_locus(SERVO, wished)
    assert abs(angle_residual_deg(SERVO, found.point)) < 1e-9
    seed = found.point
    distances = []
    for gain in found.loop_gain * np.geomspace(0.8, 1.25, 400):
        seed = point_on_locus(SERVO, float(gain), seed)
        distances.append(abs(seed - wished))
    assert abs(found.point - wished) <= min(distances) + 1e-12
    assert min(distances) == pytest.approx(abs(found.point - wished), rel=1e-3)


def test_a_gain_that_is_not_positive_is_refused() -> None:
    """The sign of a negative plant belongs in the compensator."""
    with pytest.raises(LocusError, match="must be positive"):
        point_on_locus(SERVO, -1.0, -1.0)
    with pytest.raises(LocusError, match="must be positive"):
        closed_loop_roots(SERVO, 0.0)


def test_an_open_loop_that_grows_at_high_frequency_is_refused() -> None:
    """Unfiltered derivative action on relative degree one."""
    with pytest.raises(RequestError, match="grows without bound"):
        open_loop(Plant((1.0,), (1.0, 1.0)), (1.0, 1.0, 1.0), (1.0, 0.0, 0.0)[:1])
